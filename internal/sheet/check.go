package sheet

import (
	"fmt"
	"math"
	"slices"
	"time"
	"unicode"

	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/decimal"
)

// Bounds of the service, by which a preview refuses what posting would.
const (
	futureMax            = 24 * time.Hour
	yearMin, yearMax     = 1900, 9998
	textBytesMax         = 200
	readingMax           = 1e100
	countMax, countedMin = 1e9, 1e-9
)

// checkRow finds what the chart would not take of a row.
func (b *rows) checkRow(c *pb.Chart, i int, now time.Time) *trouble {
	r, row := b.results[i], b.Rows[i].Number
	for _, check := range []func() (field, text string){
		func() (string, string) { return checkTexts(r) },
		func() (string, string) { return checkTime(r.MeasuredAt, now) },
		func() (string, string) { return checkRole(r) },
		func() (string, string) { return checkPlace(c, r) },
		func() (string, string) { return checkValues(c, r) },
	} {
		if field, text := check(); text != "" {
			return &trouble{row, b.columnOf(field), text}
		}
	}
	if first := b.first[i]; first != i && !sameContent(c, b.all[first], r) {
		return &trouble{row, b.columnOf("source_id"), b.otherContent(first)}
	}
	return nil
}

// otherContent says which row of the block has the same id with other content.
func (b *rows) otherContent(first int) string {
	r := b.all[first]
	return fmt.Sprintf("row %d has the same id with other content: measured %s, %s", b.Rows[first].Number, r.MeasuredAt, measuredText(r))
}

// sameContent reports whether two rows are one and the same post: what may be left out counts as filled in, and the same
// moment may be written with different offsets.
func sameContent(c *pb.Chart, a, b *pb.Result) bool {
	return proto.Equal(filled(c, a), filled(c, b))
}

func filled(c *pb.Chart, r *pb.Result) *pb.Result {
	out := proto.Clone(r).(*pb.Result)
	if t, err := time.Parse(time.RFC3339Nano, r.MeasuredAt); err == nil {
		out.MeasuredAt = t.UTC().Format(time.RFC3339Nano)
	}
	if out.Unit == "" {
		out.Unit = c.GetUnit()
	}
	if out.Role == pb.ResultRole_RESULT_ROLE_UNSPECIFIED {
		out.Role = pb.ResultRole_RESULT_ROLE_ROUTINE
	}
	return out
}

func checkTexts(r *pb.Result) (field, text string) {
	names := map[string]string{"source": r.Source, "source_id": r.SourceId, "lot": r.Lot, "run_id": r.RunId, "repeat_of": r.RepeatOf}
	texts := map[string]string{"unit": r.Unit, "material": r.Material, "analyst": r.Analyst, "instrument": r.Instrument}
	for _, field := range []string{"source", "source_id", "lot", "run_id", "repeat_of", "unit", "material", "analyst", "instrument"} {
		name, isName := names[field]
		s := name + texts[field]
		if len(s) > textBytesMax {
			return field, fmt.Sprintf("%d bytes long, the limit is %d", len(s), textBytesMax)
		}
		for _, c := range s {
			if unicode.IsControl(c) || isName && c > unicode.MaxASCII && unicode.In(c, unicode.Cf, unicode.Zl, unicode.Zp) {
				return field, fmt.Sprintf("has the character %U, which cannot be seen", c)
			}
		}
	}
	return "", ""
}

func checkTime(text string, now time.Time) (field, problem string) {
	t, err := time.Parse(time.RFC3339Nano, text)
	switch utc := t.UTC(); {
	case err != nil:
		return "measured_at", fmt.Sprintf("%q: want a time with an offset", clip(text))
	case utc.Year() < yearMin || utc.Year() > yearMax:
		return "measured_at", fmt.Sprintf("%q: want a year from %d to %d", clip(text), yearMin, yearMax)
	case t.After(now.Add(futureMax)):
		return "measured_at", fmt.Sprintf("%s is more than 24 hours after the present, %s", text, now.UTC().Format(time.RFC3339))
	}
	return "", ""
}

func checkRole(r *pb.Result) (field, text string) {
	switch isRepeat := r.Role == pb.ResultRole_RESULT_ROLE_REPEAT; {
	case isRepeat && r.RepeatOf == "":
		return "repeat_of", "is empty; a repeat names the id of the result it repeats"
	case !isRepeat && r.RepeatOf != "":
		return "repeat_of", "is set, but the role is not REPEAT"
	}
	return "", ""
}

func checkPlace(c *pb.Chart, r *pb.Result) (field, text string) {
	switch {
	case r.Unit != "" && r.Unit != c.Unit:
		return "unit", fmt.Sprintf("%q: chart %q is in %q", clip(r.Unit), c.Name, c.Unit)
	case c.LotsAreTracks && r.Lot == "":
		return "lot", fmt.Sprintf("is empty, and every lot of chart %q is a track of its own", c.Name)
	case c.Standardised && r.Material == "":
		return "material", fmt.Sprintf("is empty, and results of chart %q are standardised by their material", c.Name)
	}
	return "", ""
}

func checkValues(c *pb.Chart, r *pb.Result) (field, text string) {
	isCounts := slices.Contains(countKinds, c.Kind)
	switch {
	case isCounts && r.Count == nil:
		return "readings", fmt.Sprintf("chart %q takes counts%s", c.Name, wantInspected)
	case isCounts:
		return checkCount(c, r.Count)
	case r.Count != nil:
		return "inspected", fmt.Sprintf("is given, and chart %q takes readings", c.Name)
	case len(r.Readings) > int(c.SubgroupSize):
		return "readings", fmt.Sprintf("%d readings: want 1 to %d, the subgroup size", len(r.Readings), c.SubgroupSize)
	}
	for i, s := range r.Readings {
		if x, err := decimal.ParseReading(s); err != nil || math.Abs(x.Value) > readingMax {
			return fmt.Sprintf("readings[%d]", i), fmt.Sprintf("%q: the largest magnitude is %g", clip(s), readingMax)
		}
	}
	return "", ""
}

// countKinds are the kinds of charts whose results are counts.
var countKinds = []pb.ChartKind{pb.ChartKind_CHART_KIND_P, pb.ChartKind_CHART_KIND_NP, pb.ChartKind_CHART_KIND_C, pb.ChartKind_CHART_KIND_U}

func checkCount(c *pb.Chart, n *pb.Count) (field, text string) {
	isItems := c.Kind == pb.ChartKind_CHART_KIND_P || c.Kind == pb.ChartKind_CHART_KIND_NP
	switch {
	case !(n.Nonconforming >= 0) || n.Nonconforming != math.Trunc(n.Nonconforming) || n.Nonconforming > countMax:
		return "count", fmt.Sprintf("nonconforming %v: want a whole number from 0 to %.0f", n.Nonconforming, countMax)
	case !(n.Inspected >= countedMin) || n.Inspected > countMax:
		return "inspected", fmt.Sprintf("inspected %v: want at least %g, at most %.0f", n.Inspected, countedMin, countMax)
	case c.Kind == pb.ChartKind_CHART_KIND_C && n.Inspected != 1:
		return "inspected", fmt.Sprintf("inspected %v: a c chart counts in one inspection unit, written 1", n.Inspected)
	case isItems && n.Inspected != math.Trunc(n.Inspected):
		return "inspected", fmt.Sprintf("inspected %v: want a whole number of items", n.Inspected)
	case isItems && n.Nonconforming > n.Inspected:
		return "count", fmt.Sprintf("nonconforming %v: more than the %v items inspected", n.Nonconforming, n.Inspected)
	case c.Kind == pb.ChartKind_CHART_KIND_NP && n.Inspected != float64(c.SubgroupSize):
		return "inspected", fmt.Sprintf("inspected %v: an np chart has samples of one size, here %d", n.Inspected, c.SubgroupSize)
	}
	return "", ""
}
