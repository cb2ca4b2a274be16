package diagnostics

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/limits"
	"limitary/internal/rules"
)

const (
	// CodeSetupSignals is the code of more signals in the basis than clean data give.
	CodeSetupSignals = "SETUP_SIGNALS"
	// SetupSet is the set of rules that the basis is looked at with.
	SetupSet = "nelson-1984"
	// setupMin is the least number of points.
	setupMin = 10
	// setupTies bounds step·√n, the step in standard deviations of what is plotted. Rounding moves the share of points
	// beyond a line by up to half a step's worth; above the bound that changes the number of signals by more than chance
	// does (simulated: a size of 0.015 at 6.4 and of 0.04 at 14, of 0.013 and less below 6).
	setupTies = 6
)

// setup judges the basis by its own limits and counts what signals.
type setup struct {
	set      rules.Set
	plan     *rules.Plan
	rows     []SetupRow
	flagged  int // points at which at least one rule completes
	points   int
	segments []int // their lengths
	table    []criticalPoint
}

// setupOf gives nil where the limits have no location trace with centre and sigma.
func (m *material) setupOf(req *limits.Request, res *limits.Result) *setup {
	trace := res.Location
	if trace.Centre == nil || trace.Sigma == nil || !(*trace.Sigma > 0) || m.kind.Counts() {
		return nil
	}
	set, ok := rules.SetByID(SetupSet)
	if !ok {
		return nil
	}
	plan, err := rules.Compile(trace, res.PublishedDecimals, set.Rules)
	if err != nil {
		return nil
	}
	s := &setup{set: set, plan: plan, table: tableFor(res)}
	for _, r := range set.Rules {
		s.rows = append(s.rows, SetupRow{Rule: r.ID, Description: r.Describe()})
	}
	for first := 0; first < len(m.groups); {
		next := first + 1
		for next < len(m.groups) && m.groups[next].joined {
			next++
		}
		s.judge(m.groups[first:next], res)
		first = next
	}
	for i, r := range set.Rules {
		for _, length := range s.segments {
			s.rows[i].Expected += expectedHits(r, length)
		}
	}
	return s
}

// tableFor gives the critical numbers that suit how sigma was found. A mean moving range grows with the very values that
// signal, which makes signals fewer than with any other figure.
func tableFor(res *limits.Result) []criticalPoint {
	for _, e := range res.Estimates {
		if e.Chosen && e.Name == limits.MeanMovingRange && res.Origin == limits.Estimated {
			return setupPoints
		}
	}
	return setupLoosePoints
}

// judge takes one segment.
func (s *setup) judge(segment []group, res *limits.Result) {
	var xs []float64
	var at []rules.Scale
	for _, g := range segment {
		scale := s.plan.Nominal()
		if len(g.judged) != res.SubgroupSize && res.Kind != chart.Individuals {
			own, ok := limits.AtModel(res.Kind, res.ProcessSigma, &res.Model, len(g.judged))
			if !ok {
				continue
			}
			scale.Sigma = own.LocationSigma
		}
		xs, at = append(xs, decimal.Mean(g.judged, res.PublishedDecimals)), append(at, scale)
	}
	last := -1
	seen := make([]int, len(s.rows)) // one more than the last point of each rule
	s.plan.Judge(s.plan.Start(false), xs, at, func(h rules.Hit) {
		if seen[h.Rule] != h.Point+1 {
			seen[h.Rule] = h.Point + 1
			s.rows[h.Rule].Observed++
		}
		if h.Point != last {
			last = h.Point
			s.flagged++
		}
	})
	s.points += len(xs)
	s.segments = append(s.segments, len(xs))
}

// expectedHits gives the mean number of points at which a rule completes among n independent normal points in control,
// the centre and sigma known. All are closed forms; n! and the alternating permutations count orders, every one of which
// is as likely.
func expectedHits(r rules.Spec, n int) float64 {
	windows := float64(max(0, n-r.Window()+1))
	switch r.Kind {
	case rules.Beyond:
		p, total := math.Erfc(r.Z/math.Sqrt2)/2, 0.0
		for i := 1; i < min(n+1, r.M); i++ { // fewer points than m before
			total += 2 * p * binomialAtLeast(r.K-1, i-1, p)
		}
		return total + windows*2*p*binomialAtLeast(r.K-1, r.M-1, p)
	case rules.SameSide:
		return windows * math.Pow(0.5, float64(r.N-1))
	case rules.Trend:
		return windows * 2 / math.Gamma(float64(r.N)+1)
	case rules.Alternating:
		return windows * alternatingShare(r.N)
	case rules.Within:
		return windows * math.Pow(math.Erf(r.Z/math.Sqrt2), float64(r.N))
	case rules.Outside:
		tail := math.Erfc(r.Z / math.Sqrt2)
		both := math.Pow(tail, float64(r.N)) - 2*math.Pow(tail/2, float64(r.N))
		return windows * both
	}
	return 0
}

// binomialAtLeast is the probability of at least k successes in n trials.
func binomialAtLeast(k, n int, p float64) float64 {
	total := 0.0
	term := math.Pow(1-p, float64(n))
	for i := 0; i <= n; i++ {
		if i >= k {
			total += term
		}
		term *= p / (1 - p) * float64(n-i) / float64(i+1)
	}
	return total
}

// alternatingShare is the share of the orders of n different values that go up and down by turns: 2·E_n/n!, with E_n
// from the triangle of Seidel and Entringer (from memory).
func alternatingShare(n int) float64 {
	row := []float64{1}
	for i := 1; i <= n; i++ {
		next := make([]float64, i+1)
		for j := 1; j <= i; j++ {
			next[j] = next[j-1] + row[i-j]
		}
		row = next
	}
	return 2 * row[n] / math.Gamma(float64(n)+1)
}

// test compares the number of flagged points with what clean data reach in one of a hundred.
func (s *setup) test(step float64) Test {
	t := Test{
		Code: CodeSetupSignals, Name: "points flagged by the rules of " + SetupSet, Subject: PlottedPoints, N: s.points, Level: Level,
		CouldMiss: "One true signal among few points is no more than clean data may show; look at each that is listed.",
	}
	switch {
	case s.points < setupMin:
		return t.notMade(NotEnoughData, fmt.Sprintf("It needs at least %d points.", setupMin))
	case step > CoarseStep || step*math.Sqrt(float64(s.points)) > setupTies:
		return t.notMade(Void, "The readings are rounded so coarsely that the number of signals depends on how the lines fall between the steps.")
	}
	critical := setupCritical(s.table, s.points)
	t = t.withCritical(float64(s.flagged), float64(critical), s.flagged > critical)
	worst := slices.MaxFunc(s.rows, func(a, b SetupRow) int {
		return cmp.Compare(float64(a.Observed)-a.Expected, float64(b.Observed)-b.Expected)
	})
	t.text = fmt.Sprintf("%d of %d points signal against their own limits; clean data of this length give more than %d in at most one case of a hundred. The most in excess: %s, %d times, where %.2g are expected.",
		s.flagged, s.points, critical, worst.Description, worst.Observed, worst.Expected)
	t.advice = "Do not put these limits in force yet. Look for the cause of each signal; leave out, with a reason, only what has a known cause, and compute again."
	return t
}
