package rules

import (
	"fmt"
	"slices"
)

// Set is a published list of rules under a name.
type Set struct {
	ID    string
	Title string
	// Source is the publication; Provenance says how we know its content.
	Source, Provenance string
	Rules              []Spec
}

// DefaultSet is the set used where nobody chose one.
const DefaultSet = "action-warning"

const (
	fromMemory = "recalled from memory, the text was not at hand; check against a copy before use"
	common     = "common practice, no source"
)

// Sets lists the catalogue in the order it is shown. The caller owns the result.
func Sets() []Set {
	return []Set{
		set("shewhart-1931", "Shewhart's action limits",
			"W. A. Shewhart, Economic Control of Quality of Manufactured Product (1931)", fromMemory,
			beyond(1, 1, 3)),
		set("western-electric-1956", "Western Electric zone tests",
			"Western Electric, Statistical Quality Control Handbook (1956)", fromMemory,
			beyond(1, 1, 3), beyond(2, 3, 2), beyond(4, 5, 1), sameSide(8)),
		set("nelson-1984", "Nelson's eight tests",
			"L. S. Nelson, Journal of Quality Technology 16(4), 237-239 (1984)", fromMemory,
			beyond(1, 1, 3), sameSide(9), trend(6), alternating(14), beyond(2, 3, 2), beyond(4, 5, 1), within(15, 1), outside(8, 1)),
		set("action-warning", "Action and warning lines", common, common,
			line(WarningLine), line(ActionLine), beyond(2, 3, 2)),
		set("run-of-seven", "Action limits and runs of seven", common, common,
			beyond(1, 1, 3), sameSide(7), trend(7)),
		set("harmonised-1995", "Harmonised guidelines for internal quality control",
			"Harmonised guidelines for internal quality control in analytical chemistry laboratories, Pure and Applied Chemistry 67(4) (1995)",
			fromMemory, beyond(1, 1, 3), beyond(2, 2, 2), sameSide(9)),
		set("nordic-handbook", "Nordic handbook of internal quality control",
			"Internal quality control: handbook for chemical laboratories, a Nordic technical report", fromMemory,
			beyond(1, 1, 3), beyond(2, 3, 2), trend(7), beyond(10, 11, 0)),
	}
}

// SetByID finds a set of the catalogue.
func SetByID(id string) (Set, bool) {
	all := Sets()
	i := slices.IndexFunc(all, func(s Set) bool { return s.ID == id })
	if i < 0 {
		return Set{}, false
	}
	return all[i], true
}

func set(id, title, source, provenance string, specs ...Spec) Set {
	for i := range specs {
		specs[i].ID = fmt.Sprintf("%s/%d", id, i+1)
		specs[i].Consequence = specs[i].proposed()
	}
	return Set{id, title, source, provenance, specs}
}

// proposed is the consequence offered to an author, who sets it: a point beyond three sigmas or the action line stops,
// the warning line and the set-up patterns ask for a look, the rest for action.
func (s Spec) proposed() Consequence {
	switch {
	case s.Kind == BeyondLine && s.Line == WarningLine:
		return Look
	case s.Kind == BeyondLine, s.Kind == Beyond && s.K == 1 && s.M == 1 && s.Z >= 3:
		return Stop
	case s.Kind == Alternating, s.Kind == Within, s.Kind == Outside:
		return Look
	}
	return Act
}

func beyond(k, m int, z float64) Spec { return Spec{Kind: Beyond, K: k, M: m, Z: z} }
func line(l LineKind) Spec            { return Spec{Kind: BeyondLine, Line: l} }
func sameSide(n int) Spec             { return Spec{Kind: SameSide, N: n} }
func trend(n int) Spec                { return Spec{Kind: Trend, N: n} }
func alternating(n int) Spec          { return Spec{Kind: Alternating, N: n} }
func within(n int, z float64) Spec    { return Spec{Kind: Within, N: n, Z: z} }
func outside(n int, z float64) Spec   { return Spec{Kind: Outside, N: n, Z: z} }

// Describe says in words what the rule looks for.
func (s Spec) Describe() string {
	switch s.Kind {
	case Beyond:
		if s.M == 1 {
			return fmt.Sprintf("1 point beyond %v sigma", s.Z)
		}
		return fmt.Sprintf("%d of %d points beyond %v sigma on one side, the newest among them", s.K, s.M, s.Z)
	case BeyondLine:
		if s.Line == WarningLine {
			return "1 point beyond the warning line"
		}
		return "1 point beyond the action line"
	case SameSide:
		return fmt.Sprintf("%d points on one side of the centre line", s.N)
	case Trend:
		return fmt.Sprintf("%d points all rising or all falling", s.N)
	case Alternating:
		return fmt.Sprintf("%d points going up and down by turns", s.N)
	case Within:
		return fmt.Sprintf("%d points all inside %v sigma", s.N, s.Z)
	case Outside:
		if s.OneSideOK {
			return fmt.Sprintf("%d points all beyond %v sigma", s.N, s.Z)
		}
		return fmt.Sprintf("%d points all beyond %v sigma, both sides present", s.N, s.Z)
	case Span:
		return fmt.Sprintf("2 neighbours beyond %v sigma on opposite sides", s.Z/2)
	case EWMA:
		return fmt.Sprintf("weighted average (lambda %v) beyond %v of its sigmas", s.Lambda, s.Limit)
	case CUSUM:
		return fmt.Sprintf("cumulative sum (reference %v) beyond %v sigma", s.Reference, s.Interval)
	}
	return "no rule"
}

// Advice says what a completed rule may mean and what to look at first. The sentences are bench experience:
// common practice, no source.
func (s Spec) Advice() (means, lookFirst string) {
	switch s.Kind {
	case Beyond, BeyondLine:
		if s.Kind == BeyondLine && s.Line == WarningLine {
			return "One result is unusual; about one in twenty sound results is.", "The next control result before anything else."
		}
		if s.M <= 1 {
			return "One result lies where sound results almost never do.",
				"Transcription, units and dilution; then this run's standard, blank and instrument log."
		}
		return "The process may have moved, by an amount too small to pass the action line at once.",
			"What changed when the pattern began: calibration, reagent lot, analyst, column, temperature."
	case SameSide:
		return "The mean has probably moved and stayed.", "Calibration and reagent changes near the first point of the run; the age of the control material."
	case Trend:
		return "Something is wearing, ageing or evaporating.", "Age of standards, lamp, column or electrode; evaporation of the control material."
	case Alternating:
		return "Two streams may be feeding one chart by turns.", "Whether analysts, instruments or positions alternate; whether results were adjusted one after another."
	case Within:
		return "Limits may be too wide for this process, or subgroups mix streams.", "The data the limits came from; whether the results are rounded or smoothed."
	case Outside:
		return "Two levels may be mixed on one chart.", "Whether two lots, instruments or methods share the chart."
	case Span:
		return "Scatter between neighbours is larger than the limits allow for.", "Replication, pipetting, carry-over and sample order in this run."
	}
	return "A small, lasting shift has probably happened.", "What changed near the estimated start of the shift."
}
