package forms

// LeftOut gives the LOAD edges that would have closed a loop, in the order (clock, record).
func (m *ProtectionMap) LeftOut() []Feed { return m.left }

// Source gives the device whose LOAD terminals feed a device, "" where none does or its edge was left out.
func (m *ProtectionMap) Source(id string) string {
	if i, ok := m.byID[id]; ok && m.nodes[i].source >= 0 {
		return m.nodes[m.nodes[i].source].ID
	}
	return ""
}

// Ahead gives every device that power passes on its way to one, nearest first.
func (m *ProtectionMap) Ahead(id string) []string {
	i, ok := m.byID[id]
	if !ok {
		return nil
	}
	return m.walk([]int32{i}, func(n *mapNode) []int32 { return n.up })
}

// Behind gives every device that goes dark with one: what TEST takes the power from. Nearest first.
func (m *ProtectionMap) Behind(id string) []string {
	i, ok := m.byID[id]
	if !ok {
		return nil
	}
	return m.walk([]int32{i}, func(n *mapNode) []int32 { return n.down })
}

// OnCircuit gives every device that is dead once a circuit's breaker is off: those on it, and those behind them whatever
// circuit they are said to hang on.
func (m *ProtectionMap) OnCircuit(circuit string) []string {
	c, ok := m.circuit[circuit]
	if !ok {
		return nil
	}
	var breakers []string
	for _, b := range m.nodes[c].up {
		breakers = append(breakers, m.nodes[b].ID)
	}
	return append(breakers, m.walk(append([]int32{c}, m.nodes[c].up...), func(n *mapNode) []int32 { return n.down })...)
}

// walk gives the devices met from some nodes on, breadth first, those nodes left out.
func (m *ProtectionMap) walk(from []int32, next func(*mapNode) []int32) (out []string) {
	met := make(map[int32]bool, len(from))
	for _, i := range from {
		met[i] = true
	}
	for todo := from; len(todo) > 0; todo = todo[1:] {
		for _, j := range next(&m.nodes[todo[0]]) {
			if met[j] {
				continue
			}
			met[j] = true
			todo = append(todo, j)
			if id := m.nodes[j].ID; id != "" {
				out = append(out, id)
			}
		}
	}
	return out
}

// Run is a device with what its LOAD terminals feed, in order.
type Run struct {
	ID   string
	Load []Run
}

// Runs gives a circuit as it is drawn: its breakers first, then what hangs on the circuit itself in order, each with what
// its LOAD terminals feed.
func (m *ProtectionMap) Runs(circuit string) (breakers []string, runs []Run) {
	c, ok := m.circuit[circuit]
	if !ok {
		return nil, nil
	}
	for _, b := range m.nodes[c].up {
		breakers = append(breakers, m.nodes[b].ID)
		for _, run := range m.loads(b, circuit) { // fed from the breaker itself, without a circuit of their own
			if m.nodes[m.byID[run.ID]].Circuit != circuit {
				runs = append(runs, run)
			}
		}
	}
	for _, i := range m.nodes[c].down {
		if m.drawnBehind(i, circuit) {
			continue
		}
		runs = append(runs, Run{m.nodes[i].ID, m.loads(i, circuit)})
	}
	return breakers, runs
}

// drawnBehind reports whether a device of a circuit is drawn behind another one of it.
func (m *ProtectionMap) drawnBehind(i int32, circuit string) bool {
	first := m.nodes[i].source
	for s := first; s >= 0; s = m.nodes[s].source {
		if d := &m.nodes[s]; d.Circuit == circuit && !d.Gone {
			return s != first || !ProtectsCircuit(d.Kind)
		}
	}
	return false
}

// loads gives what the LOAD terminals of a device feed; breakers of the circuit being drawn stand at its head already.
func (m *ProtectionMap) loads(i int32, circuit string) (out []Run) {
	for _, j := range m.nodes[i].down {
		if d := &m.nodes[j]; d.source == i && (d.Circuit != circuit || !ProtectsCircuit(d.Kind)) {
			out = append(out, Run{m.nodes[j].ID, m.loads(j, circuit)})
		}
	}
	return out
}

// How a protector stands, the best first.
const (
	StandsWell     = "ok"
	StandsOverdue  = "overdue"  // passed, and its date has passed since
	StandsUntested = "untested" // never tested to the end
	StandsFailed   = "failed"
	StandsRemoved  = "removed" // out of service, and nothing took its place
	Unprotected    = "none"    // nothing is known to protect it
)

var standings = []string{StandsWell, StandsOverdue, StandsUntested, StandsFailed, StandsRemoved}

// Cover is how an outlet is protected: By stands as State says, and no other protector of it stands better.
type Cover struct{ State, By string }

// Cover gives how an outlet is protected: by itself where it is a protector, and by everything ahead of it. The best
// stands for all, of equals the nearest. standing tells how a protector in service stands.
func (m *ProtectionMap) Cover(id string, standing func(id string) string) Cover {
	best, rank := Cover{State: Unprotected}, len(standings)
	for _, by := range append([]string{id}, m.Ahead(id)...) {
		i, ok := m.byID[by]
		if !ok {
			continue
		}
		d := &m.nodes[i]
		state := StandsRemoved
		switch {
		case d.Gone && by == id, !d.Gone && !Protects(d.Kind), d.Gone && d.Kind != "" && !Protects(d.Kind):
			continue
		case !d.Gone:
			state = standing(by)
		}
		for r, s := range standings {
			if s == state && r < rank {
				best, rank = Cover{state, by}, r
			}
		}
	}
	return best
}
