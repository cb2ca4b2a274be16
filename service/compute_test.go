package service_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/service"
)

func compute(t testing.TB, text string) (*pb.ComputeLimitsResponse, error) {
	t.Helper()
	return (&service.LimitService{}).ComputeLimits(context.Background(), message(t, text, &pb.ComputeLimitsRequest{}))
}

func TestComputedLimitsOfAHandfulOfValues(t *testing.T) {
	// By hand: mean 10, moving ranges 2, 1, 3; their mean 2 over 2/sqrt(pi) is 1.772454 (closed form of d2 for two).
	got, err := compute(t, `{"kind": "CHART_KIND_INDIVIDUALS", "series": {"values": [9, 11, 10, 7, 13]}, "publishedDecimals": 6, "exclusions": [{"point": 4, "reason": "spilt"}]}`)
	if err != nil {
		t.Fatal(err)
	}
	want := 2.0 / (2 / math.Sqrt(math.Pi))
	if math.Abs(got.ProcessSigma-want) > 5e-7 || got.N != 4 || *got.Location.Centre != 9.25 || !got.Provisional {
		t.Errorf("got sigma %v, n %d, centre %v, provisional %t; want %v, 4, 9.25, true", got.ProcessSigma, got.N, *got.Location.Centre, got.Provisional, want)
	}
	if len(got.Exclusions) != 1 || got.Exclusions[0].Point != 4 || got.Exclusions[0].Reason != "spilt" {
		t.Errorf("got exclusions %v", got.Exclusions)
	}
	if got.Dispersion.LowerAction.Value != nil || got.Dispersion.LowerAction.Basis != pb.Basis_BASIS_ABSENT {
		t.Errorf("got a lower line of the moving range, %v, want none: it cannot be below zero", got.Dispersion.LowerAction)
	}
}

func TestAMissingValueKeepsItsIndexAndBreaksTheChain(t *testing.T) {
	// Moving ranges left: |2-1| and |8-5|; across the missing value there is none.
	got, err := compute(t, `{"kind": "CHART_KIND_INDIVIDUALS", "points": {"points": [{"statistic": 1}, {"statistic": 2}, {}, {"statistic": 5}, {"statistic": 8}, {"statistic": 100}]},
		"publishedDecimals": 6, "exclusions": [{"point": 5, "reason": "wrong bottle"}]}`)
	if err != nil {
		t.Fatal(err)
	}
	want := 2.0 / (2 / math.Sqrt(math.Pi))
	if math.Abs(got.ProcessSigma-want) > 5e-7 || len(got.Exclusions) != 1 || got.Exclusions[0].Point != 5 {
		t.Errorf("got sigma %v, exclusions %v; want %v and point 5", got.ProcessSigma, got.Exclusions, want)
	}
}

func TestComputationsAreRefused(t *testing.T) {
	const xbar = `"kind": "CHART_KIND_XBAR_R", "subgroupSize": 2, `
	for _, c := range []struct{ name, request, reason, field, text string }{
		{"no kind", `{}`, "INVALID_FIELD", "kind", "XBAR_R"},
		{"a wrong size", `{"kind": "CHART_KIND_XBAR_R", "subgroupSize": 1}`, "INVALID_FIELD", "subgroup_size", "2 to 100"},
		{"no data", `{"kind": "CHART_KIND_INDIVIDUALS"}`, "LIMITS_NOT_COMPUTABLE", "data", "nothing to take the centre from"},
		{"equal values", `{"kind": "CHART_KIND_INDIVIDUALS", "series": {"values": [1, 1, 1]}}`, "LIMITS_NOT_COMPUTABLE", "data", "spread is zero"},
		{"an infinite value", `{"kind": "CHART_KIND_INDIVIDUALS", "series": {"values": [1, "Infinity"]}}`, "INVALID_FIELD", "series.values[1]", "finite"},
		{"an infinite value after a missing one", `{"kind": "CHART_KIND_INDIVIDUALS", "points": {"points": [{}, {"readings": {"values": ["NaN"]}}]}}`, "INVALID_FIELD", "points.points[1].readings.values[0]", "finite"},
		{"a statistic that is not a number", `{"kind": "CHART_KIND_INDIVIDUALS", "points": {"points": [{}, {"statistic": "NaN"}]}}`, "INVALID_FIELD", "points.points[1].statistic", "finite"},
		{"too many readings", `{` + xbar + `"points": {"points": [{"readings": {"values": [1, 2, 3]}}]}}`, "WRONG_READING_COUNT", "points.points[0].readings", "subgroup size, 2"},
		{"a series of subgroups", `{` + xbar + `"series": {"values": [1]}}`, "INVALID_FIELD", "series", "send points"},
		{"a statistic of a subgroup", `{` + xbar + `"points": {"points": [{"statistic": 1}]}}`, "INVALID_FIELD", "points.points[0].statistic", "takes readings"},
		{"an estimator that does not fit", `{` + xbar + `"estimator": "ESTIMATOR_MEDIAN_MOVING_RANGE"}`, "INVALID_FIELD", "estimator", "does not fit"},
		{"a sigma of zero", `{` + xbar + `"processSigma": 0}`, "INVALID_FIELD", "process_sigma", "larger than zero"},
		{"too many decimals", `{` + xbar + `"publishedDecimals": 400}`, "INVALID_FIELD", "published_decimals", "want 0 to"},
		{"a fixed line of another basis", `{` + xbar + `"locationLines": {"upperAction": {"value": 3, "tail": 0.01, "basis": "BASIS_TAIL_PROBABILITY"}}}`, "INVALID_FIELD", "location_lines.upper_action.basis", "METHOD_CRITERION"},
		{"lines that cross", `{"kind": "CHART_KIND_INDIVIDUALS", "centre": 1, "processSigma": 1, "locationLines": {"upperAction": {"value": -9, "basis": "BASIS_TARGET"}}}`, "INVALID_FIELD", "location_lines.upper_action", "below the upper"},
		{"an exclusion of nothing", `{"kind": "CHART_KIND_INDIVIDUALS", "series": {"values": [1, 2]}, "exclusions": [{"point": 2, "reason": "x"}]}`, "INVALID_FIELD", "exclusions[0].point", "0 to 1"},
		{"an exclusion without a reason", `{"kind": "CHART_KIND_INDIVIDUALS", "series": {"values": [1, 2]}, "exclusions": [{"point": 1}]}`, "INVALID_FIELD", "exclusions[0].reason", "empty"},
		{"an exclusion twice", `{"kind": "CHART_KIND_INDIVIDUALS", "series": {"values": [1, 2]}, "exclusions": [{"point": 1, "reason": "x"}, {"point": 1, "reason": "y"}]}`, "INVALID_FIELD", "exclusions[1].point", "twice"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := compute(t, c.request)
			var e *definition.Error
			if !errors.As(err, &e) {
				t.Fatalf("got %v, want a refusal", err)
			}
			if string(e.Reason) != c.reason || e.Field != c.field || !strings.Contains(e.Text, c.text) {
				t.Errorf("got %s %q: %q, want %s, field %q, %q in the text", e.Reason, e.Field, e.Text, c.reason, c.field, c.text)
			}
		})
	}
}

func TestComputationsTakeAHundredThousandPointsAndNoMore(t *testing.T) {
	for n, refused := range map[int]bool{100_000: false, 100_001: true} {
		values := make([]float64, n)
		for i := range values {
			values[i] = float64(i % 7)
		}
		_, err := (&service.LimitService{}).ComputeLimits(context.Background(), &pb.ComputeLimitsRequest{
			Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, Data: &pb.ComputeLimitsRequest_Series{Series: &pb.Series{Values: values}}})
		var e *definition.Error
		if refused && (!errors.As(err, &e) || e.Reason != definition.TooManyItems || !strings.Contains(e.Text, "100000")) || !refused && err != nil {
			t.Errorf("%d values: got %v, refused want %t", n, err, refused)
		}
	}
}

// TestWhatIsComputedCanBeJudgedBy sends computed limits back as inline limits, lines and all, and holds what they say of
// readings against the lines themselves.
func TestWhatIsComputedCanBeJudgedBy(t *testing.T) {
	const seed = 20261202
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 2))
	for n := range 40 {
		size := []int{1, 4, 7}[n%3]
		kind := []pb.ChartKind{pb.ChartKind_CHART_KIND_INDIVIDUALS, pb.ChartKind_CHART_KIND_XBAR_R, pb.ChartKind_CHART_KIND_XBAR_S}[n%3]
		points := &pb.Points{}
		for range 30 {
			g := &pb.Readings{}
			for range size {
				g.Values = append(g.Values, math.Round(1000*(50+3*r.NormFloat64()))/1000)
			}
			points.Points = append(points.Points, &pb.Point{Value: &pb.Point_Readings{Readings: g}})
		}
		limits, err := (&service.LimitService{}).ComputeLimits(context.Background(), &pb.ComputeLimitsRequest{
			Kind: kind, SubgroupSize: int32(size), Data: &pb.ComputeLimitsRequest_Points{Points: points}})
		if err != nil {
			t.Fatal(err)
		}
		location := proto.Clone(limits.Location).(*pb.TraceLimits)
		location.RuleSet = "action-warning"
		inline := &pb.InlineLimits{Kind: kind, SubgroupSize: int32(size), PublishedDecimals: &limits.PublishedDecimals, Location: location,
			Dispersion: limits.Dispersion, ProcessSigma: &limits.ProcessSigma}
		got, err := (&service.EvaluationService{}).EvaluateBatch(context.Background(), &pb.EvaluateBatchRequest{Detail: pb.Detail_DETAIL_FULL,
			Evaluations: []*pb.Evaluation{{Limits: &pb.Evaluation_Inline{Inline: inline}, Data: &pb.Evaluation_Points{Points: points}}}})
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range got.Evaluations[0].Verdicts {
			if *v.Location.UpperAction != *limits.Location.UpperAction.Value || *v.Location.LowerWarning != *limits.Location.LowerWarning.Value {
				t.Fatalf("case %d: point %d was judged by lines %v, computed were %v", n, v.Point, v.Location, limits.Location)
			}
			x := *v.Location.Statistic
			beyond := x > *limits.Location.UpperAction.Value || x < *limits.Location.LowerAction.Value
			if beyond != (v.Standing == pb.Standing_STANDING_STOP) {
				t.Fatalf("case %d: point %d at %v has standing %s, lines %v", n, v.Point, x, v.Standing, limits.Location)
			}
		}
	}
}

func TestListedRulesCanBeSentBack(t *testing.T) {
	sets, err := (&service.RuleService{}).ListRules(context.Background(), &pb.ListRulesRequest{})
	if err != nil {
		t.Fatal(err)
	}
	if len(sets.RuleSets) < 7 {
		t.Errorf("got %d sets, want the seven of the catalogue", len(sets.RuleSets))
	}
	const seed = 20261203
	r := rand.New(rand.NewPCG(seed, 3))
	values := make([]float64, 400)
	for i := range values {
		values[i] = 1.5 * r.NormFloat64()
	}
	series := &pb.Evaluation_Series{Series: &pb.Series{Values: values}}
	for _, set := range sets.RuleSets {
		var specs []*pb.RuleSpec
		for i, rule := range set.Rules {
			if rule.Description == "" || rule.Means == "" || rule.LookFirst == "" || rule.Spec.Id != fmt.Sprintf("%s/%d", set.Id, i+1) {
				t.Errorf("rule %v is not explained, or not numbered as listed", rule)
			}
			specs = append(specs, rule.Spec)
		}
		zero, one := 0.0, 1.0
		inline := func(l *pb.TraceLimits) *pb.Evaluation {
			l.Centre, l.Sigma = &zero, &one
			return &pb.Evaluation{Limits: &pb.Evaluation_Inline{Inline: &pb.InlineLimits{Location: l}}, Data: series}
		}
		got, err := (&service.EvaluationService{}).EvaluateBatch(context.Background(), &pb.EvaluateBatchRequest{Evaluations: []*pb.Evaluation{
			inline(&pb.TraceLimits{RuleSet: set.Id}), inline(&pb.TraceLimits{Rules: specs})}})
		if err != nil {
			t.Fatalf("%s: %v", set.Id, err)
		}
		if len(got.Evaluations[0].Hits) == 0 || !proto.Equal(got.Evaluations[0], got.Evaluations[1]) {
			t.Errorf("%s judges otherwise by its listed rules (seed %d)", set.Id, seed)
		}
	}
}
