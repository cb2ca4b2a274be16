package report

import (
	"fmt"
	"io"

	"limitary/internal/chart"
	"limitary/internal/diagnostics"
	"limitary/internal/limits"
	"limitary/internal/report/judged"
)

// Computed is a computation of limits with the results it rests on.
type Computed struct {
	About
	Result limits.Result
	// Readings are those that the limits rest on, in order; none on charts of counts.
	Readings []float64
	// Groups of the computation, and the row of each.
	Groups []limits.Group
	RowOf  []int
	// Outcome judges the results by the limits computed from them.
	Outcome *judged.Outcome
	// Diagnostics are what the results say against the limits; Change, whether limits in force should be kept. Both may be
	// nil.
	Diagnostics *diagnostics.Report
	Change      *Change
}

// Limits writes the report of a computation.
func Limits(w io.Writer, c Computed) error {
	t := NewText(w)
	res := &c.Result
	if c.Title != "" {
		t.Title(Foreign(c.Title))
	}
	t.Title("Control limits, " + kindNames[res.Kind])
	t.line("")
	t.Pairs(append(c.filePairs(), c.basisPairs()...)...)
	t.Change(c.Change)
	t.data(&c)
	for role, trace := range [...]*chart.Trace{&res.Location, &res.Dispersion} {
		if res.Kind.Has(chart.Role(role)) {
			t.traceTable(&c, chart.Role(role), trace)
		}
	}
	t.Points(res.Kind, res.SubgroupSize, &res.Model)
	t.Tails(res.Tails)
	t.estimators(res)
	t.Components(res.Kind, res.Components, res.PublishedDecimals)
	t.Parts(res.Kind, res.Parts)
	t.Compared(res.Bias, res.SigmaRatio, res.BetweenRatio, res.PublishedDecimals)
	t.FalseAlarm(res.FalseAlarm)
	t.exclusions(&c)
	t.findings(&c)
	t.diagnostics(c.Diagnostics)
	t.Section("Signals of these results against these limits")
	t.signalTable(c.Outcome, &c.About)
	t.Section("Rules")
	t.Pairs(setPairs(c.Sets)...)
	t.noteItems(&c.About)
	t.closing()
	return t.Flush()
}

func (c *Computed) basisPairs() []Pair {
	res := &c.Result
	used := fmt.Sprintf("%s used, %d excluded", countOf(res.Kind, res.N), len(res.Excluded))
	if !res.Kind.Counts() {
		used = fmt.Sprintf("%s used, %s, %d excluded", countOf(res.Kind, res.N), Count(res.Readings, "reading"), len(res.Excluded))
	}
	size := ""
	switch {
	case res.Kind == chart.NP:
		size = fmt.Sprintf("%d items", res.SubgroupSize)
	case !res.Kind.SizeImplied():
		size = fmt.Sprintf("%d readings", res.SubgroupSize)
	}
	standing := fmt.Sprintf("%s; %s used, at least %d advised", originText(res), countOf(res.Kind, res.N), res.AdvisedMinimum)
	if res.Provisional {
		standing = "PROVISIONAL: " + standing
	}
	if res.Origin == limits.Target {
		standing = originText(res)
	}
	return []Pair{
		{"basis", used}, {"subgroup size", size}, {"judged scale", scaleText(&res.Model)}, {"limits are", standing},
		{"published", Count(res.PublishedDecimals, "decimal")}, {"computed", c.done()},
	}
}

func originText(res *limits.Result) string {
	switch {
	case res.Origin == limits.Estimated:
		return "estimated from these results"
	case res.Origin == limits.Target && res.Kind.Counts():
		return "targets: the centre is given, and sigma follows from it"
	case res.Origin == limits.Target && res.Kind.Duplicates():
		return "targets: sigma is given"
	case res.Origin == limits.Target && res.Kind == chart.RunMeans:
		return "targets: centre and both sigmas are given"
	case res.Origin == limits.Target:
		return "targets: centre and sigma are given"
	case res.Kind.Counts():
		return "mixed: the centre is a target, the extra variation is estimated from these results"
	case res.Kind.Duplicates():
		return "mixed: some sigmas are targets, the others are estimated from these results"
	case res.Kind == chart.RunMeans:
		return fmt.Sprintf("mixed: the centre is %s, sigma within runs %s, sigma between runs %s", originWord(res.CentreOrigin), originWord(res.SigmaOrigin), originWord(res.BetweenOrigin))
	case res.CentreOrigin == limits.Target:
		return "mixed: the centre is a target, sigma is estimated from these results"
	}
	return "mixed: the centre is estimated from these results, sigma is a target"
}

func originWord(o limits.Origin) string {
	if o == limits.Target {
		return "a target"
	}
	return "estimated"
}
