package sheet

import (
	"context"
	"fmt"
	"strings"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
)

// mayPost refuses a key that may not post. A post of no results, which is refused for everyone else as well, tells that
// apart and touches nothing.
func (h *Handler) mayPost(ctx context.Context) error {
	if _, err := h.evaluations.PostResults(ctx, &pb.PostResultsRequest{}); status.Code(err) != codes.InvalidArgument {
		return err
	}
	return nil
}

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
	now := h.now()
	for i, r := range b.results {
		if r == nil {
			continue
		}
		if bad := b.checkRow(c, i, now); bad != nil {
			b.trouble[i], b.results[i] = bad, nil
			b.troubles = append(b.troubles, bad)
		}
	}
	return nil
}

// Notes of a preview. What is stored is not looked at, so that a conflict with it shows only when posting.
const (
	wouldBe    = "not stored; would be stored, if nothing else is stored under this id"
	wouldNotBe = "not stored; would not be while another row is refused"
)

// preview gives the block back with what posting would store.
func (b *rows) preview(whole bool) (*answer, error) {
	more := make([][]string, len(b.Rows))
	note := wouldBe
	if whole && len(b.troubles) > 0 {
		note = wouldNotBe
	}
	for i, r := range b.results {
		switch {
		case b.trouble[i] != nil:
			more[i] = []string{"REFUSED", "", "", "", b.trouble[i].String()}
		case r == nil:
			more[i] = make([]string, len(previewColumns))
		default:
			outcome, note := "PREVIEW", note
			if first := b.first[i]; first != i {
				outcome, note = "DUPLICATE", fmt.Sprintf("not stored; row %d has the same id and content", b.Rows[first].Number)
			}
			more[i] = []string{outcome, r.Source + "/" + r.SourceId, r.MeasuredAt, strings.TrimPrefix(measuredText(r), "readings "), note}
		}
	}
	return b.answer(previewColumns, b.saying(more))
}
