package automaton

// Move is one letter of a carried machine: where the next point lies as seen from the panel of the latest one.
type Move struct {
	// Panel of the next point, and the zone letter it stands for.
	Panel, Zone int
	// Order is Rising or Falling; Class is the letter of the distance between the points. Negative ones are not shown to
	// the machine concerned.
	Order, Class int
}

// Carry joins a machine over zones with one over the order of neighbours and one over the distance between them; either
// of the latter may be nil. Moves lists the letters of each panel; its last entry belongs to the start, where there is
// no latest point. The result is minimised, its states know their panel, and letters past the end of a panel's list fire.
func Carry(w Work, zone, order, distance *DFA, moves [][]Move) (*DFA, error) {
	letters := 0
	for _, m := range moves {
		letters = max(letters, len(m))
	}
	none := &DFA{Letters: 1, Next: []int32{0}} // in the place of a machine there is none of
	if order == nil {
		order = none
	}
	if distance == nil {
		distance = none
	}
	// A state is numbered by its panel, and the states of the machines over distance, order and zones.
	panels, distances, orders := len(moves), distance.States(), order.States()
	number := func(zone, order, distance int32, panel int) int {
		return ((int(zone)*orders+int(order))*distances+int(distance))*panels + panel
	}
	idle := func(machine *DFA, at int32, letter int) (int32, bool) {
		if machine == none || letter < 0 {
			return at, false
		}
		return machine.Step(at, letter)
	}
	start := number(0, 0, 0, panels-1)
	var panelOf []int32
	d, err := exploreNumbered(w, letters, zone.Continuing, zone.States()*orders*distances*panels, start, func(s, letter int) (int, bool) {
		panel, rest := s%panels, s/panels
		if letter == 0 { // a state is asked for all its letters in turn, once
			panelOf = append(panelOf, int32(panel))
		}
		if letter >= len(moves[panel]) {
			return start, true
		}
		m := moves[panel][letter]
		z, firedZone := zone.Step(int32(rest/distances/orders), m.Zone)
		o, firedOrder := idle(order, int32(rest/distances%orders), m.Order)
		c, firedDistance := idle(distance, int32(rest%distances), m.Class)
		return number(z, o, c, m.Panel), firedZone || firedOrder || firedDistance
	})
	if err != nil {
		return nil, err
	}
	d.Panel = panelOf
	return d.Minimise(), nil
}
