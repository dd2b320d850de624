package forms

import "testing"

func judgeShipped(t *testing.T, e Entry) Verdict {
	t.Helper()
	form, ok := Shipped().Form(e.Form)
	if !ok {
		t.Fatalf("no form %q", e.Form)
	}
	kind := form.Kinds[0]
	if e.Given.Kind != "" {
		kind = e.Given.Kind
	}
	set, ok := Shipped().LimitSet(DefaultLimitSet(kind, e.Given.Delayed))
	if !ok {
		t.Fatalf("no limit set for %q", kind)
	}
	v, err := Judge(form, set, e)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func TestJudge_QuickAnswerPasses(t *testing.T) {
	for _, id := range []string{"gfci-receptacle/button", "rcd/button"} {
		form, _ := Shipped().Form(id)
		e := Entry{Form: id, Readings: map[string]Reading{}}
		for code, answer := range form.Quick.Readings {
			e.Readings[code] = Answer(answer)
		}
		if v := judgeShipped(t, e); v.Result != Pass {
			t.Errorf("%s: one tap gives %q: %+v", id, v.Result, v.Findings)
		}
	}
}

func TestFormFor_KindsAndTasks(t *testing.T) {
	for _, c := range []struct{ kind, task, want string }{
		{GFCIReceptacle, TaskButton, "gfci-receptacle/button"},
		{GFCIBreaker, TaskInstrument, "gfci-receptacle/instrument"},
		{PortableGFCI, TaskInstrument, "gfci-receptacle/instrument"},
		{PlainReceptacle, TaskReceptacle, "receptacle/receptacle"},
		{ProtectedReceptacle, TaskReceptacle, "receptacle/receptacle"},
		{HospitalReceptacle, TaskReceptacle, "hospital-receptacle/receptacle"},
		{RCBO, TaskButton, "rcd/button"},
		{RCD, TaskInstrument, "rcd/instrument"},
		{CordSet, TaskReceptacle, "cord-set/receptacle"},
		{PlugInEquipment, TaskReceptacle, "plug-in-equipment/receptacle"},
		{PlainReceptacle, TaskButton, ""},
	} {
		if got, ok := FormFor(c.kind, c.task); got != c.want || ok != (c.want != "") {
			t.Errorf("%s %s: %q, %v; want %q", c.kind, c.task, got, ok, c.want)
		}
	}
}
