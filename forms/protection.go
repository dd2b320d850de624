package forms

import (
	"cmp"
	"slices"
)

// Wired is what the protection map needs to know of a device.
type Wired struct {
	ID      string
	Kind    string // "" where the register does not hold it
	Circuit string // id of the circuit it hangs on, "" where nobody said
	Source  string // id of the device whose LOAD terminals feed it, "" for none
	Clock   uint64 // of what was said of Source, with Record the order in which edges are taken in
	Record  string
	Gone    bool // out of service and not replaced: named as a source, protects nothing
}

// Feed is one LOAD edge: Source feeds Device.
type Feed struct{ Device, Source string }

// ProtectionMap says what protects what. Power comes to a device on two ways: from its circuit, behind every device that
// protects a whole circuit (a breaker with ground-fault protection), and from the LOAD terminals of the device it names as
// its source. It never holds a loop.
type ProtectionMap struct {
	nodes   []mapNode // devices in the order they were given, then circuits
	byID    map[string]int32
	circuit map[string]int32
	left    []Feed
}

type mapNode struct {
	Wired
	up, down []int32 // nearest source first; what is fed, in the order given
	source   int32   // its LOAD source as taken in, -1 for none
}

// Protects reports whether a kind of device switches off on a ground fault.
func Protects(kind string) bool {
	return kind == GFCIReceptacle || kind == PortableGFCI || ProtectsCircuit(kind)
}

// ProtectsCircuit reports whether a kind sits at the head of a circuit and so protects all of it.
func ProtectsCircuit(kind string) bool { return kind == GFCIBreaker || kind == RCD || kind == RCBO }

// NewProtectionMap lays the map. Which edges are taken in does not depend on the order of devices; the order of what
// lists give does. Breakers stand before everything of their circuit, which closes no loop; LOAD edges follow in the order
// (clock, record), and one that would close a loop with what is there already is left out. A device of no register that is
// named as a source is there as one that is gone.
func NewProtectionMap(devices []Wired) *ProtectionMap {
	m := &ProtectionMap{byID: make(map[string]int32, len(devices)), circuit: map[string]int32{}}
	for _, d := range devices {
		m.device(d)
	}
	for _, d := range devices {
		if d.Source != "" {
			m.device(Wired{ID: d.Source, Gone: true})
		}
	}
	known := len(m.nodes)
	for i := range known {
		m.nodes[i].source = -1
		m.hang(int32(i))
	}
	for _, f := range m.loadEdges(known) {
		m.link(f.device, f.source)
		m.nodes[f.device].source = f.source
	}
	return m
}

func (m *ProtectionMap) device(d Wired) {
	if _, there := m.byID[d.ID]; !there {
		m.byID[d.ID] = int32(len(m.nodes))
		m.nodes = append(m.nodes, mapNode{Wired: d})
	}
}

// hang puts a device on its circuit, which is a node of its own: behind its breakers, before its devices.
func (m *ProtectionMap) hang(i int32) {
	d := m.nodes[i].Wired
	if d.Gone || d.Circuit == "" {
		return
	}
	c, there := m.circuit[d.Circuit]
	if !there {
		c = int32(len(m.nodes))
		m.circuit[d.Circuit] = c
		m.nodes = append(m.nodes, mapNode{source: -1})
	}
	if ProtectsCircuit(d.Kind) {
		m.link(c, i)
	} else {
		m.link(i, c)
	}
}

func (m *ProtectionMap) link(fed, source int32) {
	m.nodes[fed].up = append(m.nodes[fed].up, source)
	m.nodes[source].down = append(m.nodes[source].down, fed)
}

type loadEdge struct {
	device, source int32
	clock          uint64
	record         string
}

// loadEdges gives the LOAD edges that are taken in, and keeps those left out. Only an edge that lies on a loop of what was
// said can ever close one, so all others are taken without a look.
func (m *ProtectionMap) loadEdges(devices int) []loadEdge {
	var all []loadEdge
	for i := range devices {
		if d := &m.nodes[i]; d.Source != "" && !d.Gone {
			all = append(all, loadEdge{int32(i), m.byID[d.Source], d.Clock, d.Record})
		}
	}
	slices.SortFunc(all, func(a, b loadEdge) int {
		return cmp.Or(cmp.Compare(a.clock, b.clock), cmp.Compare(a.record, b.record), cmp.Compare(m.nodes[a.device].ID, m.nodes[b.device].ID))
	})
	knot := m.knots(all)
	taken := all[:0:0]
	inKnot := map[int32][]int32{} // device → sources taken in within its knot
	for _, e := range all {
		if knot[e.device] == knot[e.source] {
			if m.reaches(e.source, e.device, knot, inKnot) {
				m.left = append(m.left, Feed{m.nodes[e.device].ID, m.nodes[e.source].ID})
				continue
			}
			inKnot[e.device] = append(inKnot[e.device], e.source)
		}
		taken = append(taken, e)
	}
	return taken
}

// reaches reports whether one node is fed from another over what is taken in so far, within their knot.
func (m *ProtectionMap) reaches(from, to int32, knot []int32, taken map[int32][]int32) bool {
	met := map[int32]bool{from: true}
	for todo := []int32{from}; len(todo) > 0; {
		i := todo[len(todo)-1]
		if todo = todo[:len(todo)-1]; i == to {
			return true
		}
		for _, list := range [][]int32{m.nodes[i].up, taken[i]} {
			for _, j := range list {
				if knot[j] == knot[to] && !met[j] {
					met[j] = true
					todo = append(todo, j)
				}
			}
		}
	}
	return false
}

// knots gives each node the number of its strongly connected component over everything that was said (Tarjan 1972,
// written without recursion: a chain may be as long as a site is large).
func (m *ProtectionMap) knots(load []loadEdge) []int32 {
	n := len(m.nodes)
	extra := make([]int32, n) // LOAD source + 1
	for _, e := range load {
		extra[e.device] = e.source + 1
	}
	knot, index, low := make([]int32, n), make([]int32, n), make([]int32, n)
	for i := range knot {
		knot[i] = -1
	}
	next := func(i int32, k int) (int32, bool) {
		switch up := m.nodes[i].up; {
		case k < len(up):
			return up[k], true
		case k == len(up) && extra[i] > 0:
			return extra[i] - 1, true
		}
		return 0, false
	}
	type frame struct {
		node int32
		edge int
	}
	var stack []int32
	count, knots := int32(0), int32(0)
	for root := range int32(n) {
		if index[root] != 0 {
			continue
		}
		work := []frame{{root, 0}}
		for len(work) > 0 {
			f := &work[len(work)-1]
			i := f.node
			if f.edge == 0 && index[i] == 0 {
				count++
				index[i], low[i] = count, count
				stack = append(stack, i)
			}
			if j, ok := next(i, f.edge); ok {
				f.edge++
				if index[j] == 0 {
					work = append(work, frame{j, 0})
				} else if knot[j] < 0 {
					low[i] = min(low[i], index[j])
				}
				continue
			}
			if low[i] == index[i] {
				for {
					j := stack[len(stack)-1]
					stack = stack[:len(stack)-1]
					knot[j] = knots
					if j == i {
						break
					}
				}
				knots++
			}
			if work = work[:len(work)-1]; len(work) > 0 {
				p := work[len(work)-1].node
				low[p] = min(low[p], low[i])
			}
		}
	}
	return knot
}
