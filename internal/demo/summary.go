package demo

import (
	"context"

	pb "limitary/api/limitary/v1"
)

// pageSize is what lists are read in; it is also the most that a list of the demo has.
const pageSize = 1000

// summarize counts what the service has, as a reader sees it.
func (l *loader) summarize(ctx context.Context) (Summary, error) {
	ctx = as(ctx, l.tokens.Reviewer)
	sum := Summary{Base: l.base}
	charts, err := l.charts.ListCharts(ctx, &pb.ListChartsRequest{PageSize: pageSize, IncludeArchived: true, Labels: []string{groupLabel + "=" + groupName}})
	if err != nil {
		return sum, err
	}
	for _, c := range charts.Charts {
		sum.Charts++
		if c.Archived {
			sum.Archived++
		}
		if err := l.countChart(ctx, c.Name, &sum); err != nil {
			return sum, err
		}
	}
	return sum, nil
}

func (l *loader) countChart(ctx context.Context, name string, sum *Summary) error {
	tracks, err := l.charts.ListTracks(ctx, &pb.ListTracksRequest{Chart: name, PageSize: pageSize})
	if err != nil {
		return err
	}
	for _, t := range tracks.Tracks {
		sum.Tracks++
		sum.Results += int(t.Results)
		sum.SignalsOpen += int(t.OpenSignals)
		if t.State == pb.TrackState_TRACK_STATE_HOLD {
			sum.TracksHeld++
		}
	}
	versions, err := l.limits.ListVersions(ctx, &pb.ListVersionsRequest{Chart: name, PageSize: pageSize})
	if err != nil {
		return err
	}
	for _, v := range versions.Versions {
		switch v.State {
		case pb.VersionState_VERSION_STATE_APPROVED:
			sum.VersionsApproved++
		case pb.VersionState_VERSION_STATE_PROPOSED:
			sum.VersionsProposed++
		case pb.VersionState_VERSION_STATE_REJECTED:
			sum.VersionsRejected++
		}
	}
	closed, err := l.signals.QuerySignals(ctx, &pb.QuerySignalsRequest{
		Chart: name, Statuses: []pb.SignalStatus{pb.SignalStatus_SIGNAL_STATUS_CLOSED}, PageSize: pageSize,
	})
	if err != nil {
		return err
	}
	sum.SignalsClosed += len(closed.Signals)
	requests, err := l.evaluation.ListRequests(ctx, &pb.ListRequestsRequest{Chart: name, PageSize: pageSize})
	if err != nil {
		return err
	}
	for _, r := range requests.Requests {
		switch r.Status {
		case pb.ChangeStatus_CHANGE_STATUS_PENDING:
			sum.RequestsPending++
		case pb.ChangeStatus_CHANGE_STATUS_CONFIRMED:
			sum.RequestsConfirmed++
		}
	}
	marks, err := l.charts.ListMarks(ctx, &pb.ListMarksRequest{Chart: name, PageSize: pageSize})
	sum.Marked += len(marks.GetMarks())
	return err
}
