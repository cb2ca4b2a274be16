package service

import (
	"fmt"
	"math"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/store"
)

// modelSentences tell what a version's scales follow from besides process sigma.
func (e *explainer) modelSentences() (out []string) {
	m := e.judge.Limits().Model
	if m.Transform.Kind != chart.Identity {
		out = append(out, fmt.Sprintf("Readings are judged on the %s scale, after adding %s; the answer also gives places in %s, where the centre is a median.",
			m.Transform.Kind, shortest(m.Transform.Offset), e.version.Unit))
	}
	if len(m.Levels) > 0 {
		if l, ok := m.LevelOf(e.result.Result.Material); ok {
			out = append(out, fmt.Sprintf("Readings of material %q count as (reading - %s) / %s.", l.Material, shortest(l.Reference), shortest(l.Sigma)))
		}
	}
	switch {
	case m.CountMethod == chart.Exact:
		out = append(out, "Its lines are exact whole counts, each sample's own.")
	case m.Inflation > 0:
		out = append(out, "Samples were found to vary more or less than counting explains, by the factor below.")
	case m.BetweenSigma > 0 && e.version.Kind.Counts():
		out = append(out, "To the variance of counting is added that between samples.")
	}
	return out
}

// processSigma tells the process sigma of the version with its unit; nothing where the kind has none.
func (e *explainer) processSigma() string {
	m, unit := e.judge.Limits().Model, " "+e.version.Unit
	switch {
	case e.version.Kind.Counts():
		return ""
	case e.version.Kind == chart.RelativeRange:
		unit = " percent"
	case m.Transform.Kind != chart.Identity:
		unit = fmt.Sprintf(" on the %s scale", m.Transform.Kind)
	case len(m.Levels) > 0:
		unit = " on the standardised scale"
	}
	return fmt.Sprintf(" and a process sigma of %s%s", e.number(e.version.ProcessSigma), unit)
}

// noScale tells why nothing says how far a result may lie from the centre.
func noScale(r store.StoredResult) string {
	if len(r.Verdict.By.Limits().Model.Levels) > 0 {
		return fmt.Sprintf("Its material, %q, is no level of the standardised track.", r.Result.Material)
	}
	return "Its readings have a mean of zero, of which no range is a percentage."
}

// boundStatistic tells how a bound decided the verdict. A reading outside the domain of the scale lies below all of it.
func (e *explainer) boundStatistic(x float64) string {
	readings := strings.Join(e.result.Result.Readings, ", ")
	if t := e.judge.Limits().Model.Transform; t.Kind != chart.Identity && x <= t.Floor() {
		return fmt.Sprintf("Location: the readings %s lie outside the %s scale, below all that has a place on it, which proves the verdict.", readings, t.Kind)
	}
	return fmt.Sprintf("Location: the readings %s bound the value, and the bound, %s, proves the verdict.", readings, e.number(x))
}

// countStatistic tells how the plotted statistic came from a count.
func (e *explainer) countStatistic(c chart.Count, rounded string) string {
	if e.version.Kind == chart.P || e.version.Kind == chart.U {
		return fmt.Sprintf("Location: %v in %v inspected, %v / %v, %s.", c.Nonconforming, c.Inspected, c.Nonconforming, c.Inspected, rounded)
	}
	return fmt.Sprintf("Location: the count %v in %v inspected, %s.", c.Nonconforming, c.Inspected, rounded)
}

// countScale tells the sigma of a count with all that widens it.
func (e *explainer) countScale(t store.TraceVerdict) string {
	m := e.judge.Limits().Model
	law := map[chart.Kind]string{
		chart.P: "p(1 - p) / inspected", chart.NP: "np(1 - p)", chart.C: "c", chart.U: "u / inspected",
	}[e.version.Kind]
	switch {
	case m.Inflation > 0:
		law = fmt.Sprintf("%s times %s squared", law, shortest(m.Inflation))
	case m.BetweenSigma > 0:
		law = fmt.Sprintf("%s plus %s squared", law, shortest(m.BetweenSigma))
	}
	return fmt.Sprintf("Its centre is %s and its sigma the root of %s: %s.", e.number(t.Scale.Centre), law, shortest(significant(t.Scale.Sigma)))
}

// exactLine tells an exact line as the count it is.
func (e *explainer) exactLine(name string, at, multiple float64) string {
	what := e.number(at)
	if c := e.result.Result.Count; c != nil && (e.version.Kind == chart.P || e.version.Kind == chart.U) {
		what = fmt.Sprintf("%v of %v = %s", math.Round(at*c.Inspected), c.Inspected, what)
	}
	return fmt.Sprintf("The %s line is %s: the whole count that leaves at most %.4g beyond it on its side while the mean stays at the centre.", name, what, chart.TailOf(multiple))
}

// duplicateScale tells which sigma of a single reading holds at the mean of the set.
func (e *explainer) duplicateScale(t store.TraceVerdict, n int) string {
	pt, err := e.result.Result.Point(definition.Chart{Kind: e.version.Kind, SubgroupSize: e.version.SubgroupSize})
	if err != nil {
		return ""
	}
	mean := decimal.Mean(pt.Readings, decimal.Unrounded)
	sigma, absolute := e.judge.Limits().Model.Spread.At(e.version.ProcessSigma, mean)
	unit := e.version.Unit
	if e.version.Kind == chart.RelativeRange && !absolute {
		unit = "percent"
	}
	return fmt.Sprintf("The mean of the readings is %s, where the sigma of a single reading is %s %s; by the chart factors for %d readings the centre is %s and the sigma of the range %s.",
		shortest(significant(mean)), shortest(significant(sigma)), unit, n, e.number(t.Scale.Centre), shortest(significant(t.Scale.Sigma)))
}

// scaled reports whether readings are judged on another scale than they are measured on.
func (e *explainer) scaled() bool {
	m := e.judge.Limits().Model
	return m.Scaled()
}

// scaledStatistic tells how a statistic came from readings on another scale.
func (e *explainer) scaledStatistic(role chart.Role, rounded string) string {
	how, m := "standardised", e.judge.Limits().Model
	if m.Transform.Kind != chart.Identity {
		how = fmt.Sprintf("on the %s scale", m.Transform.Kind)
	}
	readings := e.result.Result.Readings
	all := strings.Join(readings, ", ")
	switch before := e.previous(); {
	case role == chart.Location && len(readings) == 1:
		return fmt.Sprintf("Location: the reading %s, %s, %s.", all, how, rounded)
	case role == chart.Location:
		return fmt.Sprintf("Location: the mean of the readings %s, each %s, %s.", all, how, rounded)
	case e.version.Kind == chart.Individuals && before != "":
		return fmt.Sprintf("Dispersion: the moving range of the readings %s and, before it, %s, each %s, %s.", all, before, how, rounded)
	case e.version.Kind == chart.Individuals:
		return fmt.Sprintf("Dispersion: the moving range of the reading %s and the one before, each %s, %s.", all, how, rounded)
	case e.version.Kind == chart.XbarR:
		return fmt.Sprintf("Dispersion: the range of the readings %s, each %s, %s.", all, how, rounded)
	}
	return fmt.Sprintf("Dispersion: the standard deviation of the readings %s, each %s, %s.", all, how, rounded)
}

// relative reports whether the range of a point is taken in percent of its mean.
func (e *explainer) relative(pt judge.Point) bool {
	if e.version.Kind != chart.RelativeRange {
		return false
	}
	_, absolute := e.judge.Limits().Model.Spread.At(0, decimal.Mean(pt.Readings, decimal.Unrounded))
	return !absolute
}
