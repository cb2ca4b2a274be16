package service

import (
	"context"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/store"
)

// ChartService keeps charts, their tracks and marks.
type ChartService struct {
	pb.UnimplementedChartServiceServer
	store *store.Store
}

// CreateChart defines a chart.
func (s *ChartService) CreateChart(ctx context.Context, in *pb.CreateChartRequest) (*pb.CreateChartResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err != nil {
		return nil, err
	}
	if in.Chart == nil {
		return nil, definition.Invalid("chart", "is not set")
	}
	c, err := chartFromProto(in.Chart)
	if err != nil {
		return nil, under("chart", err)
	}
	if !who.Key.Sees(c.Labels) {
		return nil, definition.Invalid("chart.labels", "lie outside the labels of the key, so that its holder could not see the chart")
	}
	c, err = s.store.CreateChart(ctx, who, req, c)
	if err != nil {
		return nil, err
	}
	return &pb.CreateChartResponse{Chart: chartToProto(c)}, nil
}

// GetChart gives a chart and its tracks.
func (s *ChartService) GetChart(ctx context.Context, in *pb.GetChartRequest) (*pb.GetChartResponse, error) {
	who, err := actor(ctx)
	if err = first(err, definition.CheckSlug("name", in.Name)); err != nil {
		return nil, err
	}
	c, err := s.store.GetChart(ctx, who, in.Name)
	if err != nil {
		return nil, err
	}
	tracks, err := allTracks(ctx, s.store, who, in.Name)
	if err != nil {
		return nil, err
	}
	return &pb.GetChartResponse{Chart: chartToProto(c), Tracks: tracksToProto(tracks)}, nil
}

// allTracks reads every page of a chart's tracks.
func allTracks(ctx context.Context, s *store.Store, who store.Actor, chart string) ([]store.Track, error) {
	var all []store.Track
	p := store.Page{Size: PageSizeMax}
	for {
		some, next, err := s.ListTracks(ctx, who, chart, p)
		if err != nil {
			return nil, err
		}
		all = append(all, some...)
		if next == "" {
			return all, nil
		}
		p.Token = next
	}
}

// ListCharts gives the charts the key may see.
func (s *ChartService) ListCharts(ctx context.Context, in *pb.ListChartsRequest) (*pb.ListChartsResponse, error) {
	who, err := actor(ctx)
	if err != nil {
		return nil, err
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	with, err := readLabels("labels", in.Labels)
	if err != nil {
		return nil, err
	}
	charts, next, err := s.store.ListCharts(ctx, who, p, with, in.IncludeArchived)
	if err != nil {
		return nil, err
	}
	out := &pb.ListChartsResponse{Charts: make([]*pb.Chart, len(charts)), NextPageToken: next}
	for i, c := range charts {
		out.Charts[i] = chartToProto(c)
	}
	return out, nil
}

// UpdateChart changes what may change of a chart.
func (s *ChartService) UpdateChart(ctx context.Context, in *pb.UpdateChartRequest) (*pb.UpdateChartResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err != nil {
		return nil, err
	}
	change, err := chartChange(in, who)
	if err = first(definition.CheckSlug("name", in.Name), checkID("expected_revision", in.ExpectedRevision), err); err != nil {
		return nil, err
	}
	c, err := s.store.UpdateChart(ctx, who, req, in.Name, in.ExpectedRevision, change)
	if err != nil {
		return nil, err
	}
	return &pb.UpdateChartResponse{Chart: chartToProto(c)}, nil
}

// chartChange gives what an update does to a chart.
func chartChange(in *pb.UpdateChartRequest, who store.Actor) (func(*definition.Chart) error, error) {
	if in.Title == nil && in.Labels == nil && in.Decimals == nil && in.PlanInterval == nil && in.RepeatRule == nil && in.DisplayZone == nil &&
		in.RelevantShiftSigmas == nil && in.RelevantSigmaRatio == nil {
		return nil, definition.Invalid("title", "nothing is given to change; want one of title, labels, decimals, plan_interval, repeat_rule, display_zone, relevant_shift_sigmas, relevant_sigma_ratio")
	}
	plan, err := durationFromProto("plan_interval", in.PlanInterval)
	if err != nil {
		return nil, err
	}
	change := func(c *definition.Chart) error {
		if in.Title != nil {
			c.Title = *in.Title
		}
		if in.Labels != nil {
			c.Labels = in.Labels.Labels
			if !who.Key.Sees(c.Labels) {
				return definition.Invalid("labels", "lie outside the labels of the key, so that its holder could not see the chart")
			}
		}
		if in.Decimals != nil {
			c.Decimals = decimalsFromProto(*in.Decimals, true)
		}
		if in.PlanInterval != nil {
			c.PlanInterval = plan
		}
		if in.RepeatRule != nil {
			c.RepeatRule = *in.RepeatRule
		}
		if in.DisplayZone != nil {
			c.DisplayZone = *in.DisplayZone
		}
		if in.RelevantShiftSigmas != nil {
			c.RelevantShiftSigmas = *in.RelevantShiftSigmas
		}
		if in.RelevantSigmaRatio != nil {
			c.RelevantSigmaRatio = *in.RelevantSigmaRatio
		}
		return c.CheckChangeable()
	}
	return change, change(&definition.Chart{})
}

// ArchiveChart ends posting to a chart.
func (s *ChartService) ArchiveChart(ctx context.Context, in *pb.ArchiveChartRequest) (*pb.ArchiveChartResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	err = first(err, definition.CheckSlug("name", in.Name), checkID("expected_revision", in.ExpectedRevision),
		definition.CheckText("reason", in.Reason, 1, ReasonBytesMax))
	if err != nil {
		return nil, err
	}
	c, err := s.store.ArchiveChart(ctx, who, req, in.Name, in.ExpectedRevision, in.Reason)
	if err != nil {
		return nil, err
	}
	return &pb.ArchiveChartResponse{Chart: chartToProto(c)}, nil
}

// ListTracks gives the tracks of a chart with their states.
func (s *ChartService) ListTracks(ctx context.Context, in *pb.ListTracksRequest) (*pb.ListTracksResponse, error) {
	who, err := actor(ctx)
	if err = first(err, definition.CheckSlug("chart", in.Chart)); err != nil {
		return nil, err
	}
	p, err := readPage(in.PageSize, in.PageToken)
	if err != nil {
		return nil, err
	}
	tracks, next, err := s.store.ListTracks(ctx, who, in.Chart, p)
	if err != nil {
		return nil, err
	}
	return &pb.ListTracksResponse{Tracks: tracksToProto(tracks), NextPageToken: next}, nil
}

// StartLot opens the track of a lot.
func (s *ChartService) StartLot(ctx context.Context, in *pb.StartLotRequest) (*pb.StartLotResponse, error) {
	who, req, err := writer(ctx, in.RequestId, in)
	if err = first(err, definition.CheckSlug("chart", in.Chart), checkName("lot", in.Lot, 1)); err != nil {
		return nil, err
	}
	t, err := s.store.StartLot(ctx, who, req, in.Chart, in.Lot)
	if err != nil {
		return nil, err
	}
	return &pb.StartLotResponse{Track: trackToProto(t)}, nil
}
