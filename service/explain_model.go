package service

import (
	"fmt"
	"math"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/decimal"
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
		out = append(out, fmt.Sprintf("The sigma of counting is multiplied by %s, by which samples were found to vary more or less.", shortest(m.Inflation)))
	case m.BetweenSigma > 0 && e.version.Kind.Counts():
		out = append(out, fmt.Sprintf("To the variance of counting is added that between samples, %s squared.", shortest(m.BetweenSigma)))
	}
	return out
}

// countStatistic tells how the plotted statistic came from a count.
func (e *explainer) countStatistic(c chart.Count, rounded string) string {
	if e.version.Kind == chart.P || e.version.Kind == chart.U {
		return fmt.Sprintf("Location: %v in %v inspected, %v / %v, %s.", c.Nonconforming, c.Inspected, c.Nonconforming, c.Inspected, rounded)
	}
	return fmt.Sprintf("Location: the count %v in %v inspected, %s.", c.Nonconforming, c.Inspected, rounded)
}

func (e *explainer) countScale(t store.TraceVerdict) string {
	law := map[chart.Kind]string{
		chart.P: "p(1 - p) / inspected", chart.NP: "np(1 - p)", chart.C: "c", chart.U: "u / inspected",
	}[e.version.Kind]
	return fmt.Sprintf("Its centre is %s and its sigma, from the variance of counting %s, %s.", e.number(t.Scale.Centre), law, shortest(significant(t.Scale.Sigma)))
}

// onScale tells that readings were taken on another scale; empty where they were not.
func (e *explainer) onScale() string {
	m := e.judge.Limits().Model
	switch {
	case len(m.Levels) > 0:
		return fmt.Sprintf("from the readings %s, standardised", strings.Join(e.result.Result.Readings, ", "))
	case m.Transform.Kind != chart.Identity:
		return fmt.Sprintf("from the readings %s, on the %s scale", strings.Join(e.result.Result.Readings, ", "), m.Transform.Kind)
	}
	return ""
}

// relative reports whether the range of a point is taken in percent of its mean.
func (e *explainer) relative(pt judge.Point) bool {
	if e.version.Kind != chart.RelativeRange {
		return false
	}
	_, absolute := e.judge.Limits().Model.Spread.At(0, math.Abs(decimal.Mean(pt.Readings, decimal.Unrounded)))
	return !absolute
}

func capital(s string) string { return strings.ToUpper(s[:1]) + s[1:] }
