package sheet

import (
	"context"
	"fmt"
	"strconv"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
)

// track finds the track of a chart; lot is ignored where lots are not tracks.
func (h *Handler) track(ctx context.Context, chart, lot string) (*pb.Chart, *pb.TrackStatus, error) {
	got, err := h.charts.GetChart(ctx, &pb.GetChartRequest{Name: chart})
	if err != nil {
		return nil, nil, err
	}
	if !got.Chart.LotsAreTracks {
		lot = ""
	} else if lot == "" {
		return nil, nil, refuse("every lot of chart %q is a track of its own; say lot=", chart)
	}
	for _, t := range got.Tracks {
		if t.Lot == lot {
			return got.Chart, t, nil
		}
	}
	if lot != "" {
		return nil, nil, refuse("chart %q has no lot %q", chart, clip(lot))
	}
	return got.Chart, &pb.TrackStatus{Chart: chart, State: pb.TrackState_TRACK_STATE_CLEAR}, nil
}

func stateWord(s pb.TrackState) string { return word(s.String(), "TRACK_STATE_") }

// standing is the state of a track and its open signals.
type standing struct {
	state pb.TrackState
	open  int64
}

// stands finds the standing of a track. An evaluation of no points is far less work than reading the chart, which
// answers where nothing is in force.
func (h *Handler) stands(ctx context.Context, chart, lot string) (standing, error) {
	got, err := h.evaluate(ctx, evaluation(&pb.ByChart{Name: chart, Lot: lot, ContinueTrack: true}, nil))
	if err == nil {
		return standing{got[0].TrackState, int64(got[0].OpenSignals)}, nil
	}
	if reasonOf(err) != "NO_VERSION_IN_FORCE" {
		return standing{}, err
	}
	_, t, err := h.track(ctx, chart, lot)
	return standing{t.GetState(), int64(t.GetOpenSignals())}, err
}

// state answers with the state of a track.
func (h *Handler) state(r *request) (*answer, error) {
	s, err := h.stands(r.ctx(), r.chart(), r.query.Get("lot"))
	if err != nil {
		return nil, err
	}
	return textAnswer(stateWord(s.state)), nil
}

// signalCount answers with the number of open signals of a chart or of one track.
func (h *Handler) signalCount(r *request) (*answer, error) {
	n, err := h.openSignals(r.ctx(), r.chart(), r.query.Get("lot"))
	if err != nil {
		return nil, err
	}
	return textAnswer(strconv.FormatInt(n, 10)), nil
}

func (h *Handler) openSignals(ctx context.Context, chart, lot string) (int64, error) {
	s, err := h.stands(ctx, chart, lot)
	if lot != "" || err == nil {
		return s.open, err
	}
	if status.Code(err) != codes.InvalidArgument { // which it is where every lot is a track
		return 0, err
	}
	got, err := h.charts.GetChart(ctx, &pb.GetChartRequest{Name: chart})
	if err != nil {
		return 0, err
	}
	sum := int64(0)
	for _, t := range got.Tracks {
		sum += int64(t.OpenSignals)
	}
	return sum, nil
}

// standingWord is a standing with the reason where it was not judged.
func standingWord(s pb.Standing, why pb.NotJudgedReason) string {
	text := word(s.String(), "STANDING_")
	if why != pb.NotJudgedReason_NOT_JUDGED_REASON_UNSPECIFIED {
		text = fmt.Sprintf("%s (%s)", text, word(why.String(), "NOT_JUDGED_REASON_"))
	}
	return text
}
