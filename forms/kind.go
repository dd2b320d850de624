package forms

import "slices"

// Device kinds. Their ids never change.
const (
	GFCIReceptacle      = "gfci-receptacle"
	GFCIBreaker         = "gfci-breaker"
	ProtectedReceptacle = "protected-receptacle"
	PlainReceptacle     = "receptacle"
	HospitalReceptacle  = "hospital-receptacle"
	CordSet             = "cord-set"
	PortableGFCI        = "portable-gfci"
	PlugInEquipment     = "plug-in-equipment"
	RCD                 = "rcd"
	RCBO                = "rcbo"
)

// Tasks: what is done to a device.
const (
	TaskButton     = "button"
	TaskInstrument = "instrument"
	TaskReceptacle = "receptacle"
)

// Kinds lists every device kind, in the order lists show them.
func Kinds() []string {
	return []string{GFCIReceptacle, GFCIBreaker, ProtectedReceptacle, PlainReceptacle, HospitalReceptacle, CordSet,
		PortableGFCI, PlugInEquipment, RCD, RCBO}
}

// Tasks lists every task, in the order lists show them.
func Tasks() []string { return []string{TaskButton, TaskInstrument, TaskReceptacle} }

// TasksOf gives the tasks a kind has a shipped form for, in the order of Tasks.
func TasksOf(kind string) []string {
	var tasks []string
	for _, task := range Tasks() {
		if _, ok := FormFor(kind, task); ok {
			tasks = append(tasks, task)
		}
	}
	return tasks
}

// FormFor gives the id of the shipped form that serves a kind and a task; ok is false where there is none.
func FormFor(kind, task string) (form string, ok bool) {
	for _, f := range Shipped().Forms {
		if f.Task == task && slices.Contains(f.Kinds, kind) {
			return f.ID, true
		}
	}
	return "", false
}

// DefaultLimitSet gives the shipped limit set of a kind; delayed is the S characteristic of an RCD. "" where none is
// shipped for that kind.
func DefaultLimitSet(kind string, delayed bool) string {
	switch kind {
	case GFCIReceptacle, GFCIBreaker, PortableGFCI:
		return "us-class-a"
	case PlainReceptacle, ProtectedReceptacle:
		return "us-receptacle"
	case HospitalReceptacle:
		return "us-health-care"
	case CordSet, PlugInEquipment:
		return "us-cord-set"
	case RCD, RCBO:
		if delayed {
			return "iec-delayed"
		}
		return "iec-general"
	}
	return ""
}

// IsOutlet reports whether a kind is an outlet of the building that something is plugged into.
func IsOutlet(kind string) bool {
	switch kind {
	case GFCIReceptacle, ProtectedReceptacle, PlainReceptacle, HospitalReceptacle:
		return true
	}
	return false
}

// IsPortable reports whether a kind travels: it carries its own label and has no place of its own.
func IsPortable(kind string) bool {
	return kind == CordSet || kind == PortableGFCI || kind == PlugInEquipment
}

// NoGroundPermitted is what equipment_ground says where the box has none and the code lets it be so.
const NoGroundPermitted = "none-permitted"

// MarkingFor names the marking an outlet without an equipment ground needs: the protecting device itself
// "no-equipment-ground", an outlet fed through one "both", since it is also marked as GFCI protected (NEC 406.4(D)(2)(b) and (c)).
func MarkingFor(kind string) string {
	if Protects(kind) {
		return "no-equipment-ground"
	}
	return "both"
}
