package server_test

import (
	"time"

	"google.golang.org/protobuf/types/known/timestamppb"

	pb "limitary/api/limitary/v1"
)

// stamp is a moment written in RFC 3339.
func stamp(text string) *timestamppb.Timestamp {
	t, err := time.Parse(time.RFC3339, text)
	if err != nil {
		panic(err)
	}
	return timestamppb.New(t)
}

// dialectChart is a chart with no limits.
func dialectChart(name string) *pb.Chart {
	return &pb.Chart{Name: name, Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Unit: "mg/L"}
}
