package rules

import "math/bits"

// Progress is a pattern on its way: Have of the Need points a rule asks for, the rest being still to come. A pattern that
// is complete and goes on has all but the next one.
type Progress struct {
	// Rule is the index of the rule in Plan.Specs.
	Rule       int
	Side       Side
	Have, Need int
}

// Progress lists the patterns that the newest points have at least half completed. They are what a new segment would
// cut off. Rules about a single point have none.
func (p *Plan) Progress(st *State) (list []Progress) {
	add := func(rule int, side Side, have, need int) {
		if need > 1 && 2*have >= need {
			list = append(list, Progress{rule, side, min(have, need-1), need})
		}
	}
	for k := range p.steps {
		s := &p.steps[k]
		spec := &p.specs[s.rule]
		switch spec.Kind {
		case SameSide:
			add(s.rule, Upper, st.latest(s.upper), spec.N)
			add(s.rule, Lower, st.latest(s.lower), spec.N)
		case Trend: // n points have n-1 differences
			add(s.rule, Upper, pointsOf(st.latest(s.upper)), spec.N)
			add(s.rule, Lower, pointsOf(st.latest(s.lower)), spec.N)
		case Alternating:
			add(s.rule, NoSide, st.alternations(s), spec.N)
		case Within:
			add(s.rule, NoSide, st.latest(s.inside), spec.N)
		case Outside:
			add(s.rule, NoSide, bits.LeadingZeros64(^(st.past[s.upper] | st.past[s.lower])), spec.N)
		case Beyond: // the window of the next point: the latest m-1
			if spec.K > 1 {
				add(s.rule, Upper, st.among(s.upper, spec.M-1), spec.K)
				add(s.rule, Lower, st.among(s.lower, spec.M-1), spec.K)
			}
		}
	}
	return list
}

// latest counts the newest points in a row that have a feature.
func (st *State) latest(feature int) int {
	if feature < 0 {
		return 0
	}
	return bits.LeadingZeros64(^st.past[feature])
}

func (st *State) among(feature, n int) int {
	if feature < 0 {
		return 0
	}
	return st.before(feature, n)
}

func pointsOf(differences int) int {
	if differences == 0 {
		return 0
	}
	return differences + 1
}

// alternations counts the newest points in a row that go up and down by turns.
func (st *State) alternations(s *step) int {
	up, down := st.past[s.upper], st.past[s.lower]
	if up|down == 0 {
		return 0
	}
	turns := up&(down<<1) | down&(up<<1)
	n := bits.LeadingZeros64(^turns)
	if (up|down)>>63 == 0 {
		return 0
	}
	return n + 2
}
