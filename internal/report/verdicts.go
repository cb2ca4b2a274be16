package report

import (
	"fmt"
	"io"
	"strconv"
	"strings"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/report/judged"
	"limitary/internal/resultfile"
	"limitary/internal/rules"
)

// Judgement is the judging of a file by given limits.
type Judgement struct {
	About
	Outcome *judged.Outcome
	// LimitsFrom says where centre and sigma come from.
	LimitsFrom string
	// Verdicts, where set, writes one row a result.
	Verdicts *Verdicts
}

// Judged writes the report of a judgement.
func Judged(w io.Writer, j Judgement) error {
	t := NewText(w)
	if j.Title != "" {
		t.Title(Foreign(j.Title))
	}
	l := j.Outcome.Judge.Limits()
	t.Title("Control results judged, " + kindNames[l.Kind])
	t.line("")
	t.Pairs(append(j.filePairs(), j.limitPairs(l)...)...)
	for role := range chart.Roles {
		t.lineTable(j.Outcome.Judge, role)
	}
	t.Points(l.Kind, l.SubgroupSize, &l.Model)
	t.Section("Summary")
	t.summary(j.Outcome)
	t.Section("Signals")
	t.signalTable(j.Outcome, &j.About)
	if len(j.Outcome.Hits) > 0 {
		t.Section("Hits, one for each rule that completes at a result")
		t.hitTable(j.Outcome, &j.About)
	}
	if j.Verdicts != nil {
		t.Section("Verdicts, one for each result")
		t.Table(j.Verdicts.table)
	}
	t.Section("Rules")
	t.Pairs(setPairs(j.Sets)...)
	t.noteItems(&j.About)
	t.closing()
	return t.Flush()
}

func (j *Judgement) limitPairs(l judge.Limits) []Pair {
	rounding := "nothing is rounded; decimals are compared exactly"
	if l.Places != decimal.Unrounded {
		rounding = fmt.Sprintf("statistics and lines to %s, then compared", Count(l.Places, "decimal"))
	}
	size, context := "", ""
	switch {
	case l.Kind == chart.NP:
		size = fmt.Sprintf("%d items", l.SubgroupSize)
	case l.Kind != chart.Given && !l.Kind.SizeImplied():
		size = fmt.Sprintf("%d readings; lines of smaller subgroups follow from process sigma, %s", l.SubgroupSize, Shortest(l.ProcessSigma))
	}
	if first := j.Outcome.First; first > 0 {
		context = fmt.Sprintf("line %d; the %s before count towards patterns and are not reported", j.Table.Line(first), Count(first, "result"))
	}
	return []Pair{{"limits", j.LimitsFrom}, {"subgroup size", size}, {"judged scale", scaleText(&l.Model)}, {"rounding", rounding}, {"first judged", context}, {"judged", j.done()}}
}

// lineTable writes the lines of a trace as judged.
func (t *Text) lineTable(j *judge.Judge, role chart.Role) {
	plan, l := j.Plan(role), j.Limits()
	if plan == nil {
		return
	}
	trace := l.Traces[role]
	where := j.Lines(role, plan.Nominal())
	words := lineWords{l.Kind, &l.Model, role, &trace.Trace}
	t.Section(fmt.Sprintf("%s trace: %s", capital(role.String()), judged.StatisticOf(l.Kind, &l.Model, role)))
	table := NewTable("line", ">value", ">in the unit", "rests on")
	row := func(label string, x *float64, line chart.Line, multiple float64) {
		if x == nil {
			line.Basis = chart.Absent
		}
		table.Row(label, FixedOr(x, l.Places, "none"), words.original(x, line.Basis), words.restsOn(line, multiple))
	}
	row("upper action", where.UpperAction, trace.UpperAction, chart.ActionMultiple)
	row("upper warning", where.UpperWarning, trace.UpperWarning, chart.WarningMultiple)
	table.Row(words.centreName(), FixedOr(where.Centre, l.Places, "none"), words.original(where.Centre, chart.SigmaMultiple), "")
	row("lower warning", where.LowerWarning, trace.LowerWarning, -chart.WarningMultiple)
	row("lower action", where.LowerAction, trace.LowerAction, -chart.ActionMultiple)
	if trace.Sigma != nil {
		table.Row("sigma", Significant(*trace.Sigma, 6), "", "of the plotted statistic")
	}
	t.Table(table)
	t.line("")
	ids := make([]string, len(trace.Rules))
	for i, s := range trace.Rules {
		ids[i] = s.ID
	}
	if len(ids) == 0 {
		ids = []string{"none"}
	}
	t.Paragraph("Rules: " + strings.Join(ids, ", ") + ".")
}

// summary counts results by standing.
func (t *Text) summary(o *judged.Outcome) {
	parts := []string{}
	for s := judge.StopAt; s >= judge.Clear; s-- {
		parts = append(parts, fmt.Sprintf("%d %s", o.Standings[s], s))
	}
	bound := ""
	if o.ByBound > 0 {
		bound = fmt.Sprintf(" (%d by a less-than or greater-than bound)", o.ByBound)
	}
	text := fmt.Sprintf("%s judged%s: %s.", Count(o.Rows-o.First-o.Standings[judge.NotJudged], "result"), bound, strings.Join(parts, ", "))
	if n := o.Standings[judge.NotJudged]; n > 0 {
		var why []string
		for r, k := range o.Reasons {
			if k > 0 {
				why = append(why, fmt.Sprintf("%d %s", k, judge.Reason(r)))
			}
		}
		text += fmt.Sprintf(" %d NOT_JUDGED: %s.", n, strings.Join(why, ", "))
	}
	t.Paragraph(text)
	t.Paragraph(fmt.Sprintf("Worst standing: %s. %s in %s.", o.Worst(), Count(len(o.Hits), "hit"), Count(len(o.Signals), "signal")))
}

// signalTable writes the episodes, and where the rules come from.
func (t *Text) signalTable(o *judged.Outcome, a *About) {
	if len(o.Signals) == 0 {
		t.Paragraph("None: no rule completed.")
	} else {
		describe := describer(o)
		table := NewTable("rule", "consequence", "trace", "side", ">from line", ">first hit", ">last hit", ">hits", "id", "time", "looks for")
		for _, s := range o.Signals {
			spec, at := o.Spec(s.Role, s.Rule), a.Table.Row(s.FirstHit)
			table.Row(spec.ID, spec.Consequence.String(), s.Role.String(), sideText(s.Side), strconv.Itoa(a.Table.Line(s.FirstCounting)),
				strconv.Itoa(a.Table.Line(s.FirstHit)), strconv.Itoa(a.Table.Line(s.LastHit)), strconv.Itoa(s.Hits),
				Foreign(name(at)), Foreign(at.Time), describe(s.Role, s.Rule))
		}
		t.Table(table)
		t.line("")
		t.Paragraph("Lines are lines of the file. \"From line\": the first result that counts towards the pattern. Id and time are those of the first hit.")
		t.line("")
		t.advice(o)
	}
}

// advice says once for each rule that completed what it may mean.
func (t *Text) advice(o *judged.Outcome) {
	seen := map[string]bool{}
	for _, s := range o.Signals {
		spec := o.Spec(s.Role, s.Rule)
		if seen[spec.ID] {
			continue
		}
		seen[spec.ID] = true
		means, look := spec.Advice()
		t.Item(fmt.Sprintf("%s: %s Look first: %s", spec.ID, means, look))
	}
}

// hitTable writes every hit.
func (t *Text) hitTable(o *judged.Outcome, a *About) {
	table := NewTable(">line", "id", "time", "material", ">statistic", ">in the unit", "trace", "rule", "consequence", "side", "window", ">first counting", "looks for")
	describe := describer(o)
	for _, h := range o.Hits {
		spec, row := o.Spec(h.Role, h.Rule), a.Table.Row(h.Row)
		line := strconv.Itoa(row.Line)
		window := line
		if h.WindowFirst != h.Row {
			window = strconv.Itoa(a.Table.Line(h.WindowFirst)) + " to " + line
		}
		original := ""
		if h.Role == chart.Location {
			original = originalText(o.Judge, row, h.Statistic)
		}
		table.Row(line, Foreign(name(row)), Foreign(row.Time), Foreign(row.Material), statisticText(o.Judge, boundText(row, h.Role), h.Statistic), original, h.Role.String(),
			spec.ID, spec.Consequence.String(), sideText(h.Side), window, strconv.Itoa(a.Table.Line(h.FirstCounting)), describe(h.Role, h.Rule))
	}
	t.Table(table)
}

// describer gives rules in words, each put together once.
func describer(o *judged.Outcome) func(role chart.Role, rule int) string {
	var words [chart.Roles][]string
	for role := range words {
		if plan := o.Judge.Plan(chart.Role(role)); plan != nil {
			for _, s := range plan.Specs() {
				words[role] = append(words[role], s.Describe())
			}
		}
	}
	return func(role chart.Role, rule int) string { return words[role][rule] }
}

// name is the row's id, or its subgroup.
func name(row resultfile.Row) string {
	if row.ID != "" {
		return row.ID
	}
	return row.Group
}

func sideText(s rules.Side) string { return strings.ToLower(s.String()) }

// boundText is the sign before a statistic that is only a bound.
func boundText(row resultfile.Row, role chart.Role) string {
	if role == chart.Dispersion {
		return ""
	}
	for _, r := range row.Readings {
		if sign := boundSign(r.Bound); sign != "" {
			return sign
		}
	}
	return ""
}

func boundSign(b decimal.Bound) string { return [...]string{"", "<", ">"}[b] }

// readingText writes a reading with the decimals it was written with.
func readingText(r decimal.Reading) string {
	if r.Places > decimal.PlacesMax {
		return boundSign(r.Bound) + Shortest(r.Value)
	}
	return boundSign(r.Bound) + Fixed(r.Value, r.Places)
}
