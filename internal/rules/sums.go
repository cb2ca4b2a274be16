package rules

// Sum is what an EWMA or CUSUM rule has accumulated over the points of the segment, in sigmas.
type Sum struct {
	// Rule is the index of the rule in Plan.Specs, Kind is EWMA or CUSUM.
	Rule int
	Kind Kind
	// Average is that of an EWMA, 0 for a CUSUM.
	Average float64
	// Limit is what the average, in size, or an arm must exceed at the newest point for the rule to complete. That of an
	// EWMA which is not asymptotic is 0 before the first point.
	Limit float64
	// Upper and Lower are the arms of a CUSUM, whichever sides the rule watches.
	Upper, Lower Arm
}

// Arm is one arm of a tabular CUSUM.
type Arm struct {
	// Sum is never negative.
	Sum float64
	// Points is the number of points since the arm was last 0 to comparePlaces decimals, the newest included. Points that
	// went by as bounds count, although they enter no sum.
	Points int
}

// Shift estimates how far the mean has moved to the arm's side, in sigmas: reference + Sum/Points, the mean of the
// points since the arm was last 0 (Montgomery, Introduction to Statistical Quality Control, section 9.1, from memory, and
// an identity of the recurrence where the arm began at 0). It is 0 while the arm is.
func (a Arm) Shift(reference float64) float64 {
	if a.Points == 0 {
		return 0
	}
	return reference + a.Sum/float64(a.Points)
}

// Of gives the arm of a side; the zero Arm for NoSide.
func (s Sum) Of(side Side) Arm {
	switch side {
	case Upper:
		return s.Upper
	case Lower:
		return s.Lower
	}
	return Arm{}
}

// Sums gives the accumulators after the newest point, one for each EWMA and CUSUM rule in their order, none for other
// rules. It changes nothing.
func (p *Plan) Sums(st *State) (sums []Sum) {
	for _, s := range p.steps {
		if s.slot < 0 {
			continue
		}
		spec, slots := &p.specs[s.rule], st.slots[s.slot:]
		if spec.Kind == EWMA {
			sums = append(sums, Sum{Rule: s.rule, Kind: EWMA, Average: slots[0], Limit: spec.averageLimit(slots[1])})
			continue
		}
		sums = append(sums, Sum{
			Rule: s.rule, Kind: CUSUM, Limit: spec.Interval,
			Upper: Arm{slots[0], int(slots[2])}, Lower: Arm{slots[1], int(slots[3])},
		})
	}
	return sums
}
