package sheet

import (
	"context"
	"fmt"
	"slices"
	"strings"
	"sync"
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/grid"
)

// pageSize is how much is asked for at a time.
const pageSize = 1_000

// limitColumns are those of the table of limits that come from the version.
var limitColumns = []string{"version", "effective_from", "n", "provisional", "decimals", "process_sigma", "centre", "sigma", "lower_action", "lower_warning",
	"upper_warning", "upper_action", "rules", "dispersion_centre", "dispersion_sigma", "dispersion_lower_action", "dispersion_lower_warning",
	"dispersion_upper_warning", "dispersion_upper_action", "dispersion_rules", "inspected", "scale", "original_centre", "original_lower_action",
	"original_lower_warning", "original_upper_warning", "original_upper_action"}

// limitsTable answers with the limits in force of many charts.
func (h *Handler) limitsTable(r *request) (*answer, error) {
	labels, err := r.labels()
	if err != nil {
		return nil, err
	}
	charts, err := h.listCharts(r.ctx(), labels)
	if err != nil {
		return nil, err
	}
	t, err := h.limitsOf(r.ctx(), charts)
	if err != nil {
		return nil, err
	}
	return h.tables(r, r.args[0], "limits", t)
}

func (h *Handler) listCharts(ctx context.Context, labels []string) ([]string, error) {
	var names []string
	in := &pb.ListChartsRequest{PageSize: pageSize, Labels: labels}
	for {
		got, err := h.charts.ListCharts(ctx, in)
		if err != nil {
			return nil, err
		}
		for _, c := range got.Charts {
			names = append(names, c.Name)
		}
		if len(names) > ChartsMax {
			return nil, refuse("more than %d charts, which is the limit; choose some with label=", ChartsMax)
		}
		if in.PageToken = got.NextPageToken; in.PageToken == "" {
			return names, nil
		}
	}
}

// chartsAtOnce is how many charts are read side by side.
const chartsAtOnce = 4

func (h *Handler) limitsOf(ctx context.Context, charts []string) (*grid.Table, error) {
	t := &grid.Table{Name: "Limits", Columns: slices.Concat([]string{"chart", "title", "lot", "unit", "kind", "track_state", "open_signals"}, limitColumns)}
	rows, errs := make([][][]grid.Value, len(charts)), make([]error, len(charts))
	var group sync.WaitGroup
	slots := make(chan struct{}, chartsAtOnce)
	for i, name := range charts {
		group.Go(func() {
			slots <- struct{}{}
			defer func() { <-slots }()
			if errs[i] = ctx.Err(); errs[i] == nil {
				rows[i], errs[i] = h.limitRows(ctx, name)
			}
		})
	}
	group.Wait()
	for i := range charts {
		if errs[i] != nil {
			return nil, errs[i]
		}
		t.Rows = append(t.Rows, rows[i]...)
	}
	return t, nil
}

// limitRows gives a row for each track of a chart; where no version is in force, the numbers are blank.
func (h *Handler) limitRows(ctx context.Context, name string) ([][]grid.Value, error) {
	got, err := h.charts.GetChart(ctx, &pb.GetChartRequest{Name: name})
	if err != nil {
		return nil, err
	}
	tracks := got.Tracks
	if len(tracks) == 0 {
		tracks = []*pb.TrackStatus{{Chart: name}}
	}
	var out [][]grid.Value
	for _, track := range tracks {
		v, err := h.trackVersion(ctx, track)
		if err != nil {
			return nil, err
		}
		c := got.Chart
		state := grid.Value{}
		if track.State != pb.TrackState_TRACK_STATE_UNSPECIFIED {
			state = grid.Of(stateWord(track.State))
		}
		row := []grid.Value{grid.Of(c.Name), grid.Of(c.Title), grid.Of(track.Lot), grid.Of(c.Unit), grid.Of(word(c.Kind.String(), "CHART_KIND_")),
			state, grid.Int(track.OpenSignals)}
		for _, column := range limitColumns {
			value := grid.Value{}
			if v != nil {
				value = names[column](v)
			}
			row = append(row, value)
		}
		out = append(out, row)
	}
	return out, nil
}

// trackVersion gives the version in force on a track, nil where there is none.
func (h *Handler) trackVersion(ctx context.Context, track *pb.TrackStatus) (*pb.Version, error) {
	if track.Version != 0 {
		return h.seen(ctx, track.Chart, track.Lot, track.Version)
	}
	v, err := h.version(ctx, track.Chart, track.Lot, 0) // a chart without results has no track yet
	if reasonOf(err) == "NO_VERSION_IN_FORCE" {
		return nil, nil
	}
	return v, err
}

// between reads from= and to=.
func (r *request) between() (from, to *timestamppb.Timestamp, err error) {
	read := func(name string) *timestamppb.Timestamp {
		text := r.query.Get(name)
		if text == "" || err != nil {
			return nil
		}
		t, wrong := time.Parse(time.RFC3339Nano, text)
		if wrong != nil {
			err = refuse("%s=%s: want RFC 3339, such as 2026-03-02T00:00:00Z", name, clip(text))
			return nil
		}
		return timestamppb.New(t)
	}
	from, to = read("from"), read("to")
	return from, to, err
}

func (h *Handler) results(r *request) ([]*pb.StoredResult, error) {
	from, to, err := r.between()
	if err != nil {
		return nil, err
	}
	in := &pb.ListResultsRequest{Chart: r.chart(), Lot: r.query.Get("lot"), From: from, To: to, PageSize: pageSize, IncludeVoided: true}
	var all []*pb.StoredResult
	for {
		got, err := h.evaluations.ListResults(r.ctx(), in)
		if err != nil {
			return nil, err
		}
		if all = append(all, got.Results...); len(all) > RowsOutMax {
			return nil, refuse("more than %d results, which is the limit; give from= and to=", RowsOutMax)
		}
		if in.PageToken = got.NextPageToken; in.PageToken == "" {
			return all, nil
		}
	}
}

func (h *Handler) resultsTable(r *request) (*answer, error) {
	all, err := h.results(r)
	if err != nil {
		return nil, err
	}
	return h.tables(r, r.args[1], "results-"+r.chart(), resultsOf(all))
}

func (h *Handler) verdictsTable(r *request) (*answer, error) {
	all, err := h.results(r)
	if err != nil {
		return nil, err
	}
	return h.tables(r, r.args[1], "verdicts-"+r.chart(), verdictsOf(all))
}

func (h *Handler) signalsTable(r *request) (*answer, error) {
	labels, err := r.labels()
	if err != nil {
		return nil, err
	}
	in := &pb.QuerySignalsRequest{Chart: r.query.Get("chart"), Lot: r.query.Get("lot"), Labels: labels}
	if text := r.query.Get("status"); text != "" {
		n, ok := pb.SignalStatus_value["SIGNAL_STATUS_"+strings.ToUpper(text)]
		if !ok || n == 0 {
			return nil, refuse("status=%s: want open, closed, merged or retracted", clip(text))
		}
		in.Statuses = []pb.SignalStatus{pb.SignalStatus(n)}
	}
	all, err := h.allSignals(r.ctx(), in)
	if err != nil {
		return nil, err
	}
	return h.tables(r, r.args[0], "signals", signalsOf(all))
}

func (h *Handler) allSignals(ctx context.Context, in *pb.QuerySignalsRequest) (all []*pb.Signal, err error) {
	for in.PageSize = pageSize; ; {
		got, err := h.signals.QuerySignals(ctx, in)
		if err != nil {
			return nil, err
		}
		if all = append(all, got.Signals...); len(all) > RowsOutMax {
			return nil, refuse("more than %d signals, which is the limit; give chart=, label= or status=", RowsOutMax)
		}
		if in.PageToken = got.NextPageToken; in.PageToken == "" {
			return all, nil
		}
	}
}

// workbook answers with everything of one chart.
func (h *Handler) workbook(r *request) (*answer, error) {
	if r.args[1] != "xlsx" {
		return nil, refuse("%s: want xlsx", clip(r.args[1]))
	}
	limits, err := h.limitsOf(r.ctx(), []string{r.chart()})
	if err != nil {
		return nil, err
	}
	all, err := h.results(r)
	if err != nil {
		return nil, err
	}
	signals, err := h.allSignals(r.ctx(), &pb.QuerySignalsRequest{Chart: r.chart(), Lot: r.query.Get("lot")})
	if err != nil {
		return nil, fmt.Errorf("signals: %w", err)
	}
	return h.tables(r, "xlsx", r.chart(), limits, resultsOf(all), verdictsOf(all), signalsOf(signals))
}
