package service

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"limitary/internal/decimal"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// earlierWeightMax is how much of an average the points before those shown may weigh for it still to be told: what they
// leave open then lies beyond the digits given.
const earlierWeightMax = 1e-4

// changeSentences tells, for each EWMA and CUSUM rule that completed, what it had accumulated, and since when the mean
// seems to have changed.
func (e *explainer) changeSentences() (out []string, err error) {
	for _, h := range e.result.Verdict.Hits {
		specs := e.judge.Plan(h.Role).Specs()
		i := slices.IndexFunc(specs, func(s rules.Spec) bool { return s.ID == h.Rule })
		if i < 0 {
			continue
		}
		var more []string
		switch points := e.trace(h.Role); specs[i].Kind {
		case rules.CUSUM:
			more, err = e.sumSentences(h, specs[i], points)
		case rules.EWMA:
			more, err = e.averageSentences(h, specs[i], points)
		}
		if err != nil {
			return out, err
		}
		out = append(out, more...)
	}
	return out, nil
}

// accumulation is a CUSUM arm that completed, added up again over the points since it was last zero.
type accumulation struct {
	// arm has the points that entered it; passed counts the bounds among them, which did not.
	arm    rules.Arm
	passed int
	// from is the head start it began at, 0 for none; unknown is set where its points fit both.
	from    float64
	unknown bool
}

// shift is how far the mean of the points in the arm lies on its side of the centre, in sigmas.
func (a accumulation) shift(reference float64) float64 {
	a.arm.Sum -= a.from
	return a.arm.Shift(reference)
}

func (e *explainer) sumSentences(h store.Hit, spec rules.Spec, points []store.StoredResult) ([]string, error) {
	side, last := strings.ToLower(h.Side.String()), e.result.Verdict.Traces[h.Role]
	began := h.FirstCounting
	first := slices.IndexFunc(points, func(r store.StoredResult) bool {
		return r.Result.Source == began.Source && r.Result.SourceID == began.SourceID
	})
	since := fmt.Sprintf("The change is estimated to have begun with result %s, measured %s, the first since that sum was last zero.",
		began.SourceID, moment(began.MeasuredAt))
	if first < 0 {
		return []string{
			fmt.Sprintf("The %s sum of rule %s is beyond its limit of %s sigmas; it began before the %d points shown here, so its size is not told.",
				side, h.Rule, shortest(spec.Interval), len(points)), since}, nil
	}
	a, err := e.addUp(h, spec, points, first)
	if err != nil {
		return nil, err
	}
	sum := fmt.Sprintf("The %s sum of rule %s is %s sigmas, its limit %s; it has been away from zero for %s%s.",
		side, h.Rule, shortest(significant(a.arm.Sum)), shortest(spec.Interval), counted(a.arm.Points, "point"), a.remarks(spec))
	return []string{sum, since, e.level(h, spec, a, points[first:], last)}, nil
}

// remarks tells what else is known of a sum.
func (a accumulation) remarks(spec rules.Spec) (text string) {
	if a.passed > 0 {
		text += fmt.Sprintf(", bounds, which enter no sum, left out: %d", a.passed)
	}
	switch {
	case a.unknown:
		text += fmt.Sprintf(", counted from zero; a head start of %s, where its segment began with one, comes on top", shortest(spec.HeadStart))
	case a.from > 0:
		text += fmt.Sprintf(", and began at the head start of %s", shortest(a.from))
	}
	return text
}

// level estimates where the mean now lies: the centre and reference + sum/points sigmas to the side of the arm.
func (e *explainer) level(h store.Hit, spec rules.Spec, a accumulation, points []store.StoredResult, last store.TraceVerdict) string {
	sign, word := 1.0, "+"
	if h.Side == rules.Lower {
		sign, word = -1, "-"
	}
	parts := fmt.Sprintf("%s + %s / %d", shortest(spec.Reference), shortest(significant(a.arm.Sum)), a.arm.Points)
	if a.from > 0 {
		parts = fmt.Sprintf("%s + (%s - %s) / %d", shortest(spec.Reference), shortest(significant(a.arm.Sum)), shortest(a.from), a.arm.Points)
	}
	shift := a.shift(spec.Reference)
	for _, r := range points {
		if r.Verdict.Traces[h.Role].Scale != last.Scale {
			return fmt.Sprintf("The mean since then is estimated at %s = %s sigmas, each point's own, on the %s side of the centre.",
				parts, shortest(significant(shift)), strings.ToLower(h.Side.String()))
		}
	}
	level := last.Scale.Centre + sign*shift*last.Scale.Sigma
	text := fmt.Sprintf("The new level since then is estimated at %s %s (%s) x %s = %s",
		e.number(last.Scale.Centre), word, parts, shortest(significant(last.Scale.Sigma)), e.number(decimal.Round(level, e.version.Decimals)))
	if x, own, ok := e.judge.Original(h.Role, e.result.Result.Material, level); own && ok {
		text += fmt.Sprintf(", which is %s %s", shortest(significant(x)), e.version.Unit)
	}
	return text + "."
}

// addUp adds an arm up again from its first counting point, where it was zero before; at the first point of a segment
// it may have begun at its head start, which then shows in the points that signal.
func (e *explainer) addUp(h store.Hit, spec rules.Spec, points []store.StoredResult, first int) (a accumulation, err error) {
	var fits [2]bool
	var arms [2]rules.Arm
	for i, headStart := range []bool{false, true} {
		if headStart && (spec.HeadStart == 0 || first > 0 || !e.whole) {
			break
		}
		if arms[i], fits[i], err = e.armFrom(h, spec, points[first:], headStart); err != nil {
			return a, err
		}
	}
	a.arm = arms[0]
	if a.unknown = fits[0] && fits[1]; fits[1] && !fits[0] {
		a.arm, a.from = arms[1], spec.HeadStart
	}
	for _, r := range points[first:] {
		if r.Verdict.ByBound {
			a.passed++
		}
	}
	a.arm.Points = len(points) - first - a.passed
	return a, nil
}

// armFrom replays the points and tells whether they signal where the stored verdicts say so.
func (e *explainer) armFrom(h store.Hit, spec rules.Spec, points []store.StoredResult, headStart bool) (arm rules.Arm, fits bool, err error) {
	signalled := make([]bool, len(points))
	err = e.replay(h.Role, spec, points, headStart, func(hit rules.Hit) {
		signalled[hit.Point] = signalled[hit.Point] || hit.Side == h.Side
	}, func(_ int, s rules.Sum) { arm = s.Of(h.Side) })
	fits = true
	for i, r := range points {
		stored := slices.ContainsFunc(r.Verdict.Hits, func(o store.Hit) bool { return o.Role == h.Role && o.Rule == h.Rule && o.Side == h.Side })
		fits = fits && stored == signalled[i]
	}
	return arm, fits, err
}

// averageSentences tells the average of an EWMA and dates the change to the first point after the average last lay on
// the other side of the centre (Nishina 1992, from memory).
func (e *explainer) averageSentences(h store.Hit, spec rules.Spec, points []store.StoredResult) ([]string, error) {
	sign, side := 1.0, "above"
	if h.Side == rules.Lower {
		sign, side = -1, "below"
	}
	var newest rules.Sum
	earlier := 1.0      // the weight, in the average, of what came before the points shown
	known, on := -1, -1 // the first point whose average is known, and the first of those since then on this side
	err := e.replay(h.Role, spec, points, false, func(rules.Hit) {}, func(i int, s rules.Sum) {
		if newest = s; points[i].Verdict.ByBound {
			return // its average is that of the point before
		}
		if earlier *= 1 - spec.Lambda; !e.whole && earlier > earlierWeightMax {
			return
		}
		if known < 0 {
			known = i
		}
		switch {
		case sign*s.Average <= 0:
			on = -1
		case on < 0:
			on = i
		}
	})
	if err != nil {
		return nil, err
	}
	if on < 0 { // not known, or so far out before that even little weight counts
		return []string{fmt.Sprintf("The average of rule %s is beyond its limit; it began before the %d points shown here, and what came before them still weighs %s in it, so neither its size nor the beginning of the change is told.",
			h.Rule, len(points), shortest(significant(earlier)))}, nil
	}
	average := fmt.Sprintf("The average of rule %s lies %s sigmas %s the centre, its limit %s.",
		h.Rule, shortest(significant(math.Abs(newest.Average))), side, shortest(significant(newest.Limit)))
	return []string{average, e.turned(points, known, on)}, nil
}

// turned dates the change from the first point with a known average and the first since which it has stayed on its side.
func (e *explainer) turned(points []store.StoredResult, known, on int) string {
	first := points[on].Result
	switch {
	case on > known:
		return fmt.Sprintf("The change is estimated to have begun with result %s, measured %s, the first after the average last lay at the centre or on its other side.",
			first.SourceID, moment(first.MeasuredAt))
	case e.whole:
		return fmt.Sprintf("The average has lain on this side since the first point of its segment, result %s, so the change is estimated to have begun with it or before.", first.SourceID)
	}
	return fmt.Sprintf("The average has lain on this side at least since result %s, measured %s; the change began before what is shown here.",
		first.SourceID, moment(first.MeasuredAt))
}

func moment(t time.Time) string { return t.UTC().Format(time.RFC3339Nano) }

func counted(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}
