package sheet

import (
	"context"
	"fmt"
	"strings"

	pb "limitary/api/limitary/v1"
)

// checkChart refuses what the chart would not take, as far as that can be seen without posting.
func (h *Handler) checkChart(ctx context.Context, b *rows) error {
	got, err := h.charts.GetChart(ctx, &pb.GetChartRequest{Name: b.chart})
	if err != nil {
		return err
	}
	c := got.Chart
	if c.Archived {
		return refuse("chart %q is archived; nothing more is posted to it", c.Name)
	}
	seen := map[string]int{}
	for i, r := range b.results {
		if r == nil {
			continue
		}
		if bad := b.checkRow(c, r, b.Rows[i].Number, seen); bad != nil {
			b.trouble[i], b.results[i] = bad, nil
		}
	}
	return nil
}

func (b *rows) checkRow(c *pb.Chart, r *pb.Result, row int, seen map[string]int) *trouble {
	key := r.Source + "\x00" + r.SourceId
	first, twice := seen[key]
	seen[key] = row
	switch {
	case twice:
		return &trouble{row, b.Names[b.columns.id], fmt.Sprintf("%q stands in row %d too", clip(r.SourceId), first)}
	case len(r.Readings) > int(c.SubgroupSize):
		return &trouble{row, b.Names[b.values[0]], fmt.Sprintf("%d readings: want 1 to %d, the subgroup size", len(r.Readings), c.SubgroupSize)}
	case countsKind(c.Kind) && r.Count == nil:
		return &trouble{row, b.Names[b.values[0]], fmt.Sprintf("chart %q takes counts%s", c.Name, wantInspected)}
	case !countsKind(c.Kind) && r.Count != nil:
		return &trouble{row, "inspected", fmt.Sprintf("is given, and chart %q takes readings", c.Name)}
	case c.Standardised && r.Material == "":
		return &trouble{row, "material", fmt.Sprintf("is empty, and results of chart %q are standardised by their material", c.Name)}
	case r.Unit != "" && r.Unit != c.Unit:
		return &trouble{row, "unit", fmt.Sprintf("%q: chart %q is in %q", clip(r.Unit), c.Name, c.Unit)}
	case c.LotsAreTracks && r.Lot == "":
		return &trouble{row, "lot", fmt.Sprintf("is empty, and every lot of chart %q is a track of its own", c.Name)}
	}
	return nil
}

// countsKind reports a chart whose results are counts.
func countsKind(k pb.ChartKind) bool {
	switch k {
	case pb.ChartKind_CHART_KIND_P, pb.ChartKind_CHART_KIND_NP, pb.ChartKind_CHART_KIND_C, pb.ChartKind_CHART_KIND_U:
		return true
	}
	return false
}

// preview gives the block back with what posting would store.
func (b *rows) preview() (*answer, error) {
	more := make([][]string, len(b.Rows))
	for i, r := range b.results {
		switch {
		case b.trouble[i] != nil:
			more[i] = []string{"REFUSED", "", "", "", b.trouble[i].String()}
		case r == nil:
			more[i] = make([]string, len(previewColumns))
		default:
			more[i] = []string{"PREVIEW", r.Source + "/" + r.SourceId, r.MeasuredAt, strings.TrimPrefix(measuredText(r), "readings "), "not stored; this is what would be"}
		}
	}
	return b.answer(previewColumns, more)
}
