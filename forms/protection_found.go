package forms

// What somebody found an outlet to be.
const (
	FoundDead = "dead" // dead while its protector was tripped
	FoundLive = "live" // still live while its protector was tripped
	FoundOff  = "off"  // without power on a dead circuit: whether by a protector or by the breaker is not said
)

// FoundBy tells what a test says an outlet was found to be; "" where it says nothing of it. Of a device that protects nothing
// follows: its own face is dead by its own button.
func FoundBy(kind string, readings map[string]Reading) string {
	if Protects(kind) {
		return ""
	}
	switch readings["load_dead_when_tripped"].Value {
	case "yes":
		return FoundDead
	case "no":
		return FoundLive
	}
	if readings["found"].Value == "no-power" {
		for _, r := range readings {
			if r.Missing == "circuit-dead" {
				return FoundOff
			}
		}
	}
	return ""
}

// Contradicts reports whether what was found at an outlet cannot be with the map as it is: it stayed live although the map
// has a protector ahead of it, or went dark with a protector of which the map shows none.
func (m *ProtectionMap) Contradicts(id, found string) bool {
	switch found {
	case FoundLive:
		return m.protected(id)
	case FoundDead:
		return !m.protected(id)
	}
	return false
}

// protected reports whether anything ahead of a device switches off on a ground fault, however it stands.
func (m *ProtectionMap) protected(id string) bool {
	for _, by := range m.Ahead(id) {
		if i, ok := m.byID[by]; ok && (Protects(m.nodes[i].Kind) || m.nodes[i].Gone) {
			return true
		}
	}
	return false
}
