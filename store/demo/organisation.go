package demo

import (
	"fmt"
	"strconv"
	"strings"
)

// spot is one place with its device, as the plan of the invented organisation has it.
type spot struct {
	building, floor, room, name string
	order                       float64
	kind                        string
	panel, circuit              string
	breakerA                    float64
	critical, tell              string
	from, until                 string // when TEST may be pressed there
	noGround                    bool   // equipment_ground none-permitted
	isolated                    bool   // circuit supply isolated
	residualMA                  float64
	fedBy                       string // spot of the same circuit whose LOAD terminals feed this one
	conductor                   string // where it is another than the breaker's rating suggests
	story                       string // which story of events.go this device plays in
}

// sitePlan is one site with its spots in walking order and how its rounds run.
type sitePlan struct {
	code, name, zone, address string
	firstWorkday              int // workday of the month on which the monthly round starts
	perDay                    int // devices a crew presses on a day
	spots                     []spot
}

// Walking names of the three sites. The first two are looked after well; the third fell behind in its last two months.
const (
	bracken   = "BRACKEN"
	kilnLane  = "KILN-LANE"
	ottermoor = "OTTERMOOR"
)

func sites() []sitePlan {
	return []sitePlan{
		{code: bracken, name: "Bracken Row Apartments", zone: "America/Chicago", address: "1 to 3 Bracken Row", firstWorkday: 2, perDay: 46, spots: brackenSpots()},
		{code: kilnLane, name: "Kiln Lane Day Clinic", zone: "America/Chicago", address: "14 Kiln Lane", firstWorkday: 6, perDay: 40, spots: kilnLaneSpots()},
		{code: ottermoor, name: "Ottermoor Swim Hall", zone: "America/New_York", address: "Ottermoor Park", firstWorkday: 13, perDay: 38, spots: ottermoorSpots()},
	}
}

// feeder deals out circuit numbers of one panel: odd numbers first on the left, as panels are numbered in North America.
type feeder struct {
	panel string
	next  int
}

func (f *feeder) circuit() string {
	f.next++
	return strconv.Itoa(f.next)
}

// brackenSpots: three rows of twelve apartments with laundries, basements, outdoors and garages.
func brackenSpots() []spot {
	var out []spot
	for row, building := range []string{"North row", "Middle row", "South row"} {
		panel := feeder{panel: fmt.Sprintf("RP-%d", row+1)}
		add := func(s spot) {
			s.building, s.panel, s.circuit, s.order = building, panel.panel, panel.circuit(), float64(len(out)+1)
			if s.breakerA == 0 {
				s.breakerA = 20
			}
			if s.kind == "" {
				s.kind = "gfci-receptacle"
			}
			out = append(out, s)
		}
		add(spot{floor: "Basement", room: "Pump pit", name: "Sump pump", kind: "gfci-breaker", critical: "Sump pump", tell: "Caretaker"})
		add(spot{floor: "Basement", room: "Elevator pit", name: "Pit outlet"})
		add(spot{floor: "Basement", room: "Boiler room", name: "By the door"})
		if row == 0 { // behind the pump's breaker, which protects the whole circuit
			door := &out[len(out)-1]
			door.kind, door.circuit, panel.next = "protected-receptacle", "1", panel.next-1
		}
		for i, side := range []string{"left", "middle", "right"} {
			laundry := fmt.Sprintf("Laundry %d", row+1)
			s := spot{floor: "Basement", room: laundry, name: laundry + ", " + side}
			switch {
			case row == 2 && i == 0:
				s.story = "drift"
			case row == 0 && i == 2:
				s.story = "open-slow"
			}
			add(s)
		}
		for floor, label := range []string{"Ground floor", "First floor", "Second floor"} {
			for _, letter := range []string{"A", "B", "C", "D"} {
				home := fmt.Sprintf("Apartment %d%d%s", row+1, floor, letter)
				add(spot{floor: label, room: home, name: "Kitchen, left of the sink"})
				add(spot{floor: label, room: home, name: "Kitchen, right of the sink"})
				add(spot{floor: label, room: home, name: "Bathroom", breakerA: 15, noGround: row == 1 && floor == 2})
			}
		}
		for _, name := range []string{"Front door", "Back door", "Bin store"} {
			s := spot{floor: "Outdoors", room: "Yard", name: name}
			if row == 0 && name == "Bin store" {
				s.conductor = "14 AWG"
			}
			add(s)
		}
		for bay := 1; bay <= 4+row%2; bay++ {
			add(spot{floor: "Outdoors", room: "Garages", name: fmt.Sprintf("Garage %d", bay), breakerA: 15})
		}
	}
	return out
}

// kilnLaneSpots: a clinic with patient-care rooms, one of them on isolated power.
func kilnLaneSpots() []spot {
	var out []spot
	add := func(f *feeder, s spot) {
		s.building, s.panel, s.order = "Clinic", f.panel, float64(len(out)+1)
		if s.circuit == "" {
			s.circuit = f.circuit()
		}
		if s.breakerA == 0 {
			s.breakerA = 20
		}
		out = append(out, s)
	}
	ground, upper := &feeder{panel: "LP-1"}, &feeder{panel: "LP-2", next: 19}
	kitchen := &feeder{panel: "LP-2"}
	add(kitchen, spot{floor: "Ground floor", room: "Kitchen", name: "Pantry, by the sink", kind: "gfci-receptacle", circuit: "14", tell: "Nurse in charge", from: "06:00", until: "08:30", story: "pantry"})
	for _, name := range []string{"Pantry, door", "Hall, north", "Nurses' room"} {
		s := spot{floor: "Ground floor", room: "Kitchen", name: name, kind: "protected-receptacle", circuit: "14", fedBy: "Pantry, by the sink"}
		if name == "Nurses' room" {
			s.room, s.critical, s.tell = "Nurses' room", "Vaccine refrigerator", "Nurse in charge"
		} else if name == "Hall, north" {
			s.room = "Hall"
		}
		add(kitchen, s)
	}
	for _, name := range []string{"Counter, left", "Counter, right", "Coffee machine"} {
		s := spot{floor: "Ground floor", room: "Kitchen", name: name, kind: "gfci-receptacle"}
		if strings.HasPrefix(name, "Counter") {
			s.circuit = "16"
		}
		if name == "Counter, right" {
			s.fedBy = "Counter, left"
		}
		add(kitchen, s)
	}
	for i := 1; i <= 4; i++ {
		add(ground, spot{floor: "Ground floor", room: fmt.Sprintf("Washroom %d", i), name: "By the mirror", kind: "gfci-receptacle"})
	}
	for _, name := range []string{"Laundry", "Cleaner's sink", "Entrance, outside", "Delivery door, outside", "Lab, sink left", "Lab, sink right", "Waiting room, fountain", "Waiting room, play corner"} {
		s := spot{floor: "Ground floor", room: "Service", name: name, kind: "gfci-receptacle"}
		if name == "Cleaner's sink" { // nothing protects it, though it stands by a sink
			s.kind = "receptacle"
		}
		add(ground, s)
	}
	for i := 1; i <= 8; i++ {
		add(ground, spot{floor: "Ground floor", room: fmt.Sprintf("Consulting %d", i), name: "Desk", kind: "receptacle"})
	}
	for room := 1; room <= 8; room++ {
		label := fmt.Sprintf("Treatment %d", room)
		for _, name := range []string{"Bed, left", "Bed, right", "Foot wall", "Door wall"} {
			s := spot{floor: "Ground floor", room: label, name: name, kind: "hospital-receptacle", isolated: room == 8}
			if room == 8 {
				s.tell = "Anesthetist"
			}
			add(ground, s)
		}
		add(ground, spot{floor: "Ground floor", room: label, name: "Hand basin", kind: "gfci-receptacle"})
	}
	for bay := 1; bay <= 10; bay++ {
		label := fmt.Sprintf("Recovery bay %d", bay)
		for _, name := range []string{"Head, left", "Head, right"} {
			s := spot{floor: "First floor", room: label, name: name, kind: "hospital-receptacle"}
			if bay == 4 && name == "Head, right" {
				s.story = "open-retention"
			}
			add(upper, s)
		}
	}
	for i := 1; i <= 12; i++ {
		name := []string{"Basin, left", "Basin, right", "Shower"}[(i-1)%3]
		add(upper, spot{floor: "First floor", room: fmt.Sprintf("Washroom %d", 4+(i+2)/3), name: name, kind: "gfci-receptacle"})
	}
	return out
}

// ottermoorSpots: a swim hall; its plant house holds a pump skid built to IEC with RCDs in it.
func ottermoorSpots() []spot {
	var out []spot
	add := func(f *feeder, s spot) {
		s.panel, s.order = f.panel, float64(len(out)+1)
		if s.circuit == "" {
			s.circuit = f.circuit()
		}
		if s.building == "" {
			s.building = "Hall"
		}
		if s.kind == "" {
			s.kind = "gfci-receptacle"
		}
		if s.breakerA == 0 {
			s.breakerA = 20
		}
		out = append(out, s)
	}
	hall, changing, plant, skid := &feeder{panel: "HP-1"}, &feeder{panel: "HP-2"}, &feeder{panel: "PP-1"}, &feeder{panel: "Skid"}
	for i := 1; i <= 14; i++ {
		add(hall, spot{floor: "Pool level", room: "Pool deck", name: fmt.Sprintf("Deck post %d", i)})
	}
	for _, name := range []string{"Starting blocks, timing", "Lifeguard chair", "First-aid room", "Storage, pool robot", "Teaching pool, lift", "Spectators, row 1", "Spectators, row 5", "Loudspeaker desk", "Score board"} {
		add(hall, spot{floor: "Pool level", room: "Pool deck", name: name})
	}
	for _, side := range []string{"Changing rooms, east", "Changing rooms, west"} {
		for i := 1; i <= 8; i++ {
			add(changing, spot{floor: "Entry level", room: side, name: fmt.Sprintf("Hair dryer %d", i)})
		}
		add(changing, spot{floor: "Entry level", room: side, name: "Showers, cleaner's outlet"})
	}
	for _, name := range []string{"Counter", "Dishwasher", "Sink, left", "Sink, right", "Ice machine", "Terrace"} {
		add(changing, spot{floor: "Entry level", room: "Café", name: name})
	}
	for _, name := range []string{"Ticket desk", "Vending machine 1", "Vending machine 2", "Drinking fountain"} {
		add(changing, spot{floor: "Entry level", room: "Foyer", name: name})
	}
	for _, s := range []spot{
		{name: "Dosing pump", critical: "Dosing pump", tell: "Pool technician", from: "05:30", until: "09:30", story: "open-no-trip"},
		{name: "Filter control", story: "open-no-reset"},
		{name: "Workbench", kind: "protected-receptacle", circuit: "2", fedBy: "Filter control"},
		{name: "Test kit, wall", kind: "protected-receptacle", circuit: "2", fedBy: "Filter control", critical: "Chlorine meter", tell: "Pool technician"},
		{name: "Sump pump", kind: "gfci-breaker", critical: "Sump pump", tell: "Pool technician"},
		{name: "Wave machine", kind: "gfci-breaker"},
		{name: "Underwater lights, shallow end", kind: "gfci-breaker"},
		{name: "Underwater lights, deep end", kind: "gfci-breaker"},
	} {
		s.floor, s.room = "Plant level", "Plant room"
		add(plant, s)
	}
	for i := 1; i <= 6; i++ {
		add(skid, spot{building: "Plant house", floor: "Ground floor", room: "Pump skid", name: fmt.Sprintf("Circulation pump %d", i), kind: "rcd", breakerA: 25, residualMA: 30})
	}
	for i := 1; i <= 2; i++ {
		add(skid, spot{building: "Plant house", floor: "Ground floor", room: "Pump skid", name: fmt.Sprintf("Heat exchanger %d", i), kind: "rcbo", breakerA: 16, residualMA: 30})
	}
	for _, name := range []string{"North lawn", "South lawn", "Car park, lamp 1", "Car park, lamp 2", "Car park, lamp 3", "Bicycle shed", "Roof, air handler", "Roof, de-icing"} {
		add(plant, spot{building: "Outdoors", floor: "Ground", room: "Grounds", name: name})
	}
	out = append(out, spot{name: "Pool vacuum lead", kind: "portable-gfci", breakerA: 15}, spot{name: "Leak-search pump lead", kind: "portable-gfci", breakerA: 15})
	for i := 1; i <= 8; i++ {
		out = append(out, spot{name: fmt.Sprintf("Workshop lead %d", i), kind: "cord-set", breakerA: 15})
	}
	return out
}
