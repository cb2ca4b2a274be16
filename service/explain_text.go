package service

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/store"
)

var notJudgedTexts = map[judge.Reason]string{
	judge.NoResult:           "There are no readings.",
	judge.NoVersion:          "No version of limits was in force for this track when it was measured.",
	judge.TooFewReadings:     "It has fewer readings than any trace of the chart needs.",
	judge.BoundProvesNothing: "It is a less-than or greater-than result, and its bound leaves open on which side of the lines the value lies, or the chart has no rule that a bound can enter.",
	judge.Voided:             "It was voided.",
	judge.NoScale:            "Nothing says how far such a result may lie from the centre.",
}

func notJudgedSentences(r store.StoredResult) []string {
	text := notJudgedTexts[r.Verdict.Reason]
	if r.Verdict.Reason == judge.NoScale && r.Verdict.By != nil {
		text = noScale(r)
	}
	if r.Voided {
		text = notJudgedTexts[judge.Voided]
	}
	return []string{strings.TrimSpace(text + " It was not judged, and that is not the same as clear.")}
}

// sentences tells how the statistics and lines of the verdict came about.
func (e *explainer) sentences() []string {
	v := e.version
	out := []string{fmt.Sprintf("Version %d of chart %s judged it, effective from %s; it publishes %d decimals%s.",
		v.Number, v.Chart, v.EffectiveFrom.UTC().Format("2006-01-02T15:04:05Z07:00"), v.Decimals, e.processSigma())}
	out = append(out, e.modelSentences()...)
	if e.result.Result.Role == definition.Repeat {
		out = append(out, "It is a repeat: it is judged as the next point would be, but is no point itself, and does not overrule the first result.")
	}
	if e.result.Verdict.Standing == judge.NotJudged {
		return append(out, notJudgedSentences(e.result)...)
	}
	for role := range chart.Roles {
		out = append(out, e.traceSentences(role)...)
	}
	return append(out, e.conclusion()...)
}

func (e *explainer) traceSentences(role chart.Role) []string {
	if e.judge.Plan(role) == nil {
		return nil
	}
	t := e.result.Verdict.Traces[role]
	if !t.Point {
		return []string{e.noPoint(role)}
	}
	out := []string{e.statistic(role, t.Statistic)}
	if s := e.scale(role, t); s != "" {
		out = append(out, s)
	}
	limits := e.version.Location
	if role == chart.Dispersion {
		limits = e.version.Dispersion
	}
	for _, l := range []struct {
		name     string
		line     chart.Line
		at       *float64
		multiple float64
	}{
		{"upper action", limits.UpperAction, t.Lines.UpperAction, chart.ActionMultiple},
		{"upper warning", limits.UpperWarning, t.Lines.UpperWarning, chart.WarningMultiple},
		{"lower warning", limits.LowerWarning, t.Lines.LowerWarning, -chart.WarningMultiple},
		{"lower action", limits.LowerAction, t.Lines.LowerAction, -chart.ActionMultiple},
	} {
		out = append(out, e.line(role, l.name, l.line, l.at, t, l.multiple))
	}
	return out
}

func (e *explainer) noPoint(role chart.Role) string {
	switch {
	case e.result.Verdict.ByBound:
		return fmt.Sprintf("There is no point on the %s trace: a bound has no scatter.", role)
	case e.version.Kind.Counts() || e.version.Kind.Duplicates():
		return fmt.Sprintf("There is no point on the %s trace.", role)
	case e.version.Kind == chart.Individuals:
		return "There is no moving range: it is the first value of its segment, or follows a bound."
	}
	return fmt.Sprintf("There is no point on the %s trace: it needs at least 2 readings.", role)
}

// statistic tells how the plotted statistic came from the readings.
func (e *explainer) statistic(role chart.Role, x float64) string {
	readings := e.result.Result.Readings
	rounded := fmt.Sprintf("rounded half away from zero to %d decimals: %s", e.version.Decimals, e.number(x))
	if e.result.Verdict.ByBound {
		return e.boundStatistic(x)
	}
	if c := e.result.Result.Count; c != nil {
		return e.countStatistic(*c, rounded)
	}
	pt, err := e.result.Result.Point(definition.Chart{Kind: e.version.Kind, SubgroupSize: e.version.SubgroupSize})
	if err != nil { // the readings were checked when they were stored
		return ""
	}
	if e.scaled() {
		return e.scaledStatistic(role, rounded)
	}
	switch {
	case role == chart.Location && len(readings) == 1:
		return fmt.Sprintf("Location: the reading %s, %s.", readings[0], rounded)
	case role == chart.Location:
		return fmt.Sprintf("Location: the mean of %d readings, (%s) / %d = %s, %s.", len(readings), strings.Join(readings, " + "), len(readings),
			shortest(decimal.Mean(pt.Readings, decimal.Unrounded)), rounded)
	case e.version.Kind == chart.Individuals:
		if before := e.previous(); before != "" {
			return fmt.Sprintf("Dispersion: the moving range |%s - %s|, %s.", readings[0], before, rounded)
		}
		return fmt.Sprintf("Dispersion: the moving range, %s.", rounded)
	case e.version.Kind == chart.XbarR || e.version.Kind.Duplicates():
		lo, hi := 0, 0
		for i, r := range pt.Readings {
			if r < pt.Readings[lo] {
				lo = i
			}
			if r > pt.Readings[hi] {
				hi = i
			}
		}
		if e.relative(pt) {
			return fmt.Sprintf("Dispersion: the range %s - %s in percent of the mean of the readings, %s, %s.", readings[hi], readings[lo],
				shortest(decimal.Mean(pt.Readings, decimal.Unrounded)), rounded)
		}
		return fmt.Sprintf("Dispersion: the range %s - %s, %s.", readings[hi], readings[lo], rounded)
	}
	return fmt.Sprintf("Dispersion: the standard deviation of %d readings about their mean, %s.", len(readings), rounded)
}

// previous gives the reading that a moving range reaches back to.
func (e *explainer) previous() string {
	if n := len(e.before); n > 0 && len(e.before[n-1].Result.Readings) == 1 {
		return e.before[n-1].Result.Readings[0]
	}
	return ""
}

// scale tells where the sigma of the plotted statistic came from.
func (e *explainer) scale(role chart.Role, t store.TraceVerdict) string {
	n := len(e.result.Result.Readings)
	switch {
	case t.Scale.Sigma == 0:
		return ""
	case e.version.Kind.Counts():
		return e.countScale(t)
	case role == chart.Location && e.version.Kind == chart.RunMeans:
		return fmt.Sprintf("Its centre is %s and its sigma the root of %s squared between runs and %s squared / %d within: %s.", e.number(t.Scale.Centre),
			e.number(e.judge.Limits().Model.BetweenSigma), e.number(e.version.ProcessSigma), n, shortest(significant(t.Scale.Sigma)))
	case e.version.Kind.Duplicates():
		return e.duplicateScale(t, n)
	case role == chart.Dispersion:
		return fmt.Sprintf("Its centre is %s and its sigma %s; both follow from the process sigma by the chart factors for %d readings.",
			e.number(t.Scale.Centre), shortest(significant(t.Scale.Sigma)), e.dispersionSize(n))
	case n == 1:
		return fmt.Sprintf("Its centre is %s and its sigma the process sigma, %s.", e.number(t.Scale.Centre), shortest(significant(t.Scale.Sigma)))
	}
	return fmt.Sprintf("Its centre is %s and its sigma %s / sqrt(%d) = %s.", e.number(t.Scale.Centre), e.number(e.version.ProcessSigma), n, shortest(significant(t.Scale.Sigma)))
}

// dispersionSize is the number of readings behind one statistic of dispersion: two for a moving range.
func (e *explainer) dispersionSize(n int) int {
	if e.version.Kind == chart.Individuals {
		return 2
	}
	return n
}

func (e *explainer) line(role chart.Role, name string, l chart.Line, at *float64, t store.TraceVerdict, multiple float64) string {
	switch {
	case at == nil:
		return fmt.Sprintf("There is no %s line on the %s trace.", name, role)
	case l.Basis == chart.TailProbability && e.version.Kind.Counts():
		return e.exactLine(name, *at, multiple)
	case l.Fixed():
		return fmt.Sprintf("The %s line is %s, a %s: it does not depend on sigma.", name, e.number(*at), strings.ReplaceAll(l.Basis.String(), "_", " "))
	}
	sign := "+"
	if multiple < 0 {
		sign = "-"
	}
	return fmt.Sprintf("The %s line is %s %s %v x %s = %s, rounded.", name, e.number(t.Scale.Centre), sign, math.Abs(multiple), shortest(significant(t.Scale.Sigma)), e.number(*at))
}

func (e *explainer) conclusion() []string {
	var out []string
	v := e.result.Verdict
	for _, h := range v.Hits {
		side := ""
		if s := strings.ToLower(h.Side.String()); s != "none" {
			side = " on the " + s + " side"
		}
		out = append(out, fmt.Sprintf("Rule %s completed on the %s trace%s: %s.", h.Rule, h.Role, side, h.Consequence))
	}
	if len(v.Hits) == 0 {
		return append(out, "No rule completed, so the standing is CLEAR. That does not mean that the result is right.")
	}
	return append(out, fmt.Sprintf("The standing is the worst of these: %s.", v.Standing))
}

// number writes a published figure with its decimals.
func (e *explainer) number(x float64) string {
	return strconv.FormatFloat(x, 'f', e.version.Decimals, 64)
}

func shortest(x float64) string { return strconv.FormatFloat(x, 'f', -1, 64) }

// significantDigits of an unrounded sigma are shown.
const significantDigits = 6

func significant(x float64) float64 {
	text := strconv.FormatFloat(x, 'g', significantDigits, 64)
	y, err := strconv.ParseFloat(text, 64)
	if err != nil {
		return x
	}
	return y
}
