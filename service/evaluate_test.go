package service_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"google.golang.org/protobuf/encoding/protojson"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/service"
)

func message[M proto.Message](t testing.TB, text string, m M) M {
	t.Helper()
	if err := protojson.Unmarshal([]byte(text), m); err != nil {
		t.Fatalf("%v in %s", err, text)
	}
	return m
}

func evaluate(t testing.TB, text string) (*pb.EvaluateBatchResponse, error) {
	t.Helper()
	return (&service.EvaluationService{}).EvaluateBatch(context.Background(), message(t, text, &pb.EvaluateBatchRequest{}))
}

// workedExample is the example of the contract's page: its request and, field by field, its answer.
const workedExample = `{"evaluations": [
  {"inline": {"location": {"centre": 10, "sigma": 1, "ruleSet": "nelson-1984"}}, "series": {"values": [10.2, "NaN", 13.4]}},
  {"inline": {"location": {"centre": 0, "sigma": 1, "rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 2, "m": 3, "z": 2}}]}},
   "points": {"points": [{"statistic": 0}, {"statistic": 2.1}, {"statistic": 2.9, "sigma": 1.2}, {"statistic": 1, "breakBefore": true}]}}]}`

func TestTheWorkedExampleGivesItsAnswer(t *testing.T) {
	got, err := evaluate(t, workedExample)
	if err != nil {
		t.Fatal(err)
	}
	want := message(t, `{"evaluations": [
	  {"hits": [{"point": 2, "trace": "TRACE_ROLE_LOCATION", "rule": "nelson-1984/1", "side": "SIDE_UPPER", "windowFirst": 2, "firstCounting": 2, "consequence": "CONSEQUENCE_STOP"}],
	   "standing": "STANDING_STOP", "pointsJudged": 2},
	  {"hits": [{"point": 2, "trace": "TRACE_ROLE_LOCATION", "rule": "a", "side": "SIDE_UPPER", "windowFirst": 0, "firstCounting": 1, "consequence": "CONSEQUENCE_ACT"}],
	   "standing": "STANDING_ACT", "pointsJudged": 4}], "judge": 1}`, &pb.EvaluateBatchResponse{})
	if !proto.Equal(got, want) {
		t.Errorf("got  %v\nwant %v", got, want)
	}
}

func TestSeriesPointsAndDetailAgree(t *testing.T) {
	const seed = 20261201
	t.Logf("seed %d", seed)
	r := rand.New(rand.NewPCG(seed, 1))
	for n := range 60 {
		kind := []string{"", `"kind": "CHART_KIND_INDIVIDUALS", "publishedDecimals": 3,`}[n%2]
		dispersion := ""
		if n%2 == 1 { // mean 2/sqrt(pi) and standard deviation of |x-y| for two normal values
			dispersion = `, "dispersion": {"centre": 1.128, "sigma": 0.853, "ruleSet": "run-of-seven"}`
		}
		var series, points []string
		for range 80 {
			x := r.NormFloat64() * 1.4
			if r.IntN(10) == 0 {
				series, points = append(series, `"NaN"`), append(points, "{}")
				continue
			}
			series, points = append(series, fmt.Sprintf("%.3f", x)), append(points, fmt.Sprintf(`{"statistic": %.3f}`, x))
		}
		first := r.IntN(81)
		request := func(data, detail string) string {
			return fmt.Sprintf(`{"evaluations": [{"inline": {%s "location": {"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}%s}, %s, "firstJudged": %d}]%s}`,
				kind, dispersion, data, first, detail)
		}
		asSeries, err1 := evaluate(t, request(`"series": {"values": [`+strings.Join(series, ",")+`]}`, ""))
		asPoints, err2 := evaluate(t, request(`"points": {"points": [`+strings.Join(points, ",")+`]}`, ""))
		full, err3 := evaluate(t, request(`"series": {"values": [`+strings.Join(series, ",")+`]}`, `, "detail": "DETAIL_FULL"`))
		if err := errors.Join(err1, err2, err3); err != nil {
			t.Fatal(err)
		}
		if !proto.Equal(asSeries, asPoints) {
			t.Fatalf("case %d: series and points differ\n%v\n%v", n, asSeries, asPoints)
		}
		checkDetail(t, asSeries.Evaluations[0], full.Evaluations[0], first, len(series))
	}
}

// checkDetail holds the verdicts of a full answer against the hits of a short one.
func checkDetail(t *testing.T, short, full *pb.EvaluationResult, first, n int) {
	t.Helper()
	if len(full.Verdicts) != n-first {
		t.Fatalf("got %d verdicts, want %d", len(full.Verdicts), n-first)
	}
	var hits []*pb.Hit
	for i, v := range full.Verdicts {
		if int(v.Point) != first+i {
			t.Fatalf("verdict %d is of point %d, want %d", i, v.Point, first+i)
		}
		hits = append(append(hits, v.Location.GetHits()...), v.Dispersion.GetHits()...)
	}
	full.Verdicts = nil
	if !proto.Equal(short, full) {
		t.Fatalf("short and full answers differ\n%v\n%v", short, full)
	}
	if len(hits) != len(short.Hits) {
		t.Fatalf("got %d hits in verdicts, want %d", len(hits), len(short.Hits))
	}
	for i := range hits {
		if !proto.Equal(hits[i], short.Hits[i]) {
			t.Fatalf("hit %d: got %v in the verdict, want %v", i, hits[i], short.Hits[i])
		}
	}
}

// location makes a request of one evaluation from the inline limits' location trace and its data.
func location(trace, data string) string {
	return `{"evaluations": [{"inline": {"location": ` + trace + `}, ` + data + `}]}`
}

const oneValue = `"series": {"values": [1]}`

func TestInlineLimitsAreRefused(t *testing.T) {
	for _, c := range []struct{ name, request, field, text string }{
		{"no limits", `{"evaluations": [{"series": {"values": [1]}}]}`, "evaluations[0].limits", "one of chart and inline"},
		{"no data", `{"evaluations": [{"inline": {"location": {"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}}}]}`, "evaluations[0].data", "one of series and points"},
		{"no trace", `{"evaluations": [{"inline": {}, "series": {"values": [1]}}]}`, "evaluations[0].inline.location.rules", "exactly one"},
		{"no rules", location(`{"centre": 0, "sigma": 1}`, oneValue), "evaluations[0].inline.location.rules", "exactly one"},
		{"rules and a set", location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1984", "rules": [{"id": "a"}]}`, oneValue), "evaluations[0].inline.location.rule_set", "exactly one"},
		{"an unknown set", location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1985"}`, oneValue), "evaluations[0].inline.location.rule_set", "no such set"},
		{"a rule without consequence", location(`{"centre": 0, "sigma": 1, "rules": [{"id": "a", "trend": {"n": 6}}]}`, oneValue), "evaluations[0].inline.location.rules[0].consequence", "want LOOK"},
		{"k above m", location(`{"centre": 0, "sigma": 1, "rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 4, "m": 3, "z": 2}}]}`, oneValue), "evaluations[0].inline.location.rules[0].beyond.k", "1 to m"},
		{"a rule that needs a sigma", location(`{"centre": 0, "rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 1, "m": 1, "z": 2}}]}`, oneValue), "evaluations[0].inline.location.rules[0].rule", "no sigma"},
		{"sigma 0", location(`{"centre": 0, "sigma": 0, "ruleSet": "nelson-1984"}`, oneValue), "evaluations[0].inline.location.sigma", "above 0"},
		{"an infinite centre", location(`{"centre": "Infinity", "sigma": 1, "ruleSet": "nelson-1984"}`, oneValue), "evaluations[0].inline.location.centre", "finite"},
		{"a line that is not where sigma puts it", location(`{"centre": 10, "sigma": 1, "upperAction": {"value": 13.5}, "ruleSet": "action-warning"}`, oneValue), "evaluations[0].inline.location.upper_action.value", "lies at 13 here"},
		{"an absent line with a value", location(`{"centre": 10, "sigma": 1, "lowerAction": {"value": 1, "basis": "BASIS_ABSENT"}, "ruleSet": "action-warning"}`, oneValue), "evaluations[0].inline.location.lower_action.value", "ABSENT"},
		{"a criterion without a value", location(`{"centre": 10, "sigma": 1, "lowerAction": {"basis": "BASIS_METHOD_CRITERION"}, "ruleSet": "action-warning"}`, oneValue), "evaluations[0].inline.location.lower_action.value", "not set"},
		{"a tail of a criterion", location(`{"centre": 10, "sigma": 1, "lowerAction": {"value": 1, "tail": 0.1, "basis": "BASIS_TARGET"}, "ruleSet": "action-warning"}`, oneValue), "evaluations[0].inline.location.lower_action.tail", "TAIL_PROBABILITY"},
		{"an infinite value", location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}`, `"series": {"values": [1, "-Infinity"]}`), "evaluations[0].series.values[1]", "finite"},
		{"a statistic that is not a number", location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}`, `"points": {"points": [{"statistic": "NaN"}]}`), "evaluations[0].points.points[0].statistic", "no result"},
		{"readings without a kind", location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}`, `"points": {"points": [{"readings": {"values": [1]}}]}`), "evaluations[0].points.points[0].readings", "name a kind"},
		{"a count", location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}`, `"points": {"points": [{"count": {"nonconforming": 1}}]}`), "evaluations[0].points.points[0].count", "statistics"},
		{"context beyond the data", location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}`, `"series": {"values": [1]}, "firstJudged": 2`), "evaluations[0].first_judged", "0 to 1"},
		{"a series for subgroups", `{"evaluations": [{"inline": {"kind": "CHART_KIND_XBAR_R", "subgroupSize": 4, "location": {"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}}, "series": {"values": [1]}}]}`, "evaluations[0].series", "send points"},
		{"too many readings", `{"evaluations": [{"inline": {"kind": "CHART_KIND_XBAR_R", "subgroupSize": 2, "location": {"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}}, "points": {"points": [{"readings": {"values": [1, 2, 3]}}]}}]}`, "evaluations[0].points.points[0].readings", "1 to 2"},
		{"a sigma that rounds to zero", `{"evaluations": [{"inline": {"publishedDecimals": 0, "kind": "CHART_KIND_INDIVIDUALS", "location": {"centre": 0, "sigma": 0.4, "ruleSet": "nelson-1984"}}, "series": {"values": [1]}}]}`, "evaluations[0].inline.published_decimals", "rounds to zero"},
		{"the second evaluation is named", `{"evaluations": [{"inline": {"location": {"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}}, "series": {}}, {}]}`, "evaluations[1].limits", "one of"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := evaluate(t, c.request)
			var e *definition.Error
			if !errors.As(err, &e) {
				t.Fatalf("got %v, want a refusal", err)
			}
			if e.Field != c.field || !strings.Contains(e.Text, c.text) {
				t.Errorf("got %q: %q, want field %q and %q in the text", e.Field, e.Text, c.field, c.text)
			}
		})
	}
}

func TestALineWhereSigmaPutsItIsTaken(t *testing.T) {
	// 10 + 3 x 0.1 in float64 is 10.3 but for the last bit; the client's own arithmetic must not refuse its lines.
	centre, sigma := 10.0, 0.1
	got, err := evaluate(t, location(fmt.Sprintf(`{"centre": 10, "sigma": 0.1, "upperAction": {"value": %v}, "ruleSet": "action-warning"}`, math.Nextafter(centre+3*sigma, 11)),
		`"series": {"values": [10.3, 10.31]}`))
	if err != nil {
		t.Fatal(err)
	}
	var action []int32
	for _, h := range got.Evaluations[0].Hits {
		if h.Rule == "action-warning/2" {
			action = append(action, h.Point)
		}
	}
	if len(action) != 1 || action[0] != 1 { // on the line is not beyond it
		t.Errorf("the action line was passed at %v, want at point 1 alone", action)
	}
}

func TestNothingJudgedIsNotClear(t *testing.T) {
	for name, data := range map[string]string{
		"an empty series": `"series": {}`, "only context": `"series": {"values": [1, 2]}, "firstJudged": 2`, "only missing values": `"series": {"values": ["NaN"]}`,
		"a point without a value": `"points": {"points": [{}]}`,
	} {
		t.Run(name, func(t *testing.T) {
			got, err := evaluate(t, location(`{"centre": 0, "sigma": 1, "ruleSet": "nelson-1984"}`, data))
			if err != nil {
				t.Fatal(err)
			}
			if r := got.Evaluations[0]; r.Standing != pb.Standing_STANDING_NOT_JUDGED || r.PointsJudged != 0 {
				t.Errorf("got %s, %d points judged", r.Standing, r.PointsJudged)
			}
		})
	}
}

func TestEvaluationLimitsAtTheLimitAndOneAbove(t *testing.T) {
	limits := message(t, `{"location": {"centre": 0, "sigma": 1, "ruleSet": "shewhart-1931"}}`, &pb.InlineLimits{})
	of := func(n int) *pb.Evaluation {
		return &pb.Evaluation{Limits: &pb.Evaluation_Inline{Inline: limits}, Data: &pb.Evaluation_Series{Series: &pb.Series{Values: make([]float64, n)}}}
	}
	times := func(n int, e *pb.Evaluation) []*pb.Evaluation {
		out := make([]*pb.Evaluation, n)
		for i := range out {
			out[i] = e
		}
		return out
	}
	for _, c := range []struct {
		name    string
		request *pb.EvaluateBatchRequest
		text    string // of the refusal; "" where there is none
	}{
		{"1,000 evaluations", &pb.EvaluateBatchRequest{Evaluations: times(1000, of(1))}, ""},
		{"1,001 evaluations", &pb.EvaluateBatchRequest{Evaluations: times(1001, of(1))}, "1001 evaluations, the limit is 1000"},
		{"100,000 values", &pb.EvaluateBatchRequest{Evaluations: times(1, of(100_000))}, ""},
		{"100,001 values", &pb.EvaluateBatchRequest{Evaluations: times(1, of(100_001))}, "the limit is 100000"},
		{"1,000,000 values in all", &pb.EvaluateBatchRequest{Evaluations: times(10, of(100_000))}, ""},
		{"1,000,001 values in all", &pb.EvaluateBatchRequest{Evaluations: append(times(10, of(100_000)), of(1))}, "the limit is 1000000"},
		{"100,000 verdicts", &pb.EvaluateBatchRequest{Evaluations: times(1, of(100_000)), Detail: pb.Detail_DETAIL_FULL}, ""},
		{"100,001 verdicts", &pb.EvaluateBatchRequest{Evaluations: append(times(1, of(100_000)), of(1)), Detail: pb.Detail_DETAIL_FULL}, "the limit is 100000"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := (&service.EvaluationService{}).EvaluateBatch(context.Background(), c.request)
			var e *definition.Error
			switch {
			case c.text == "" && err != nil:
				t.Errorf("got %v, want an answer", err)
			case c.text != "" && (!errors.As(err, &e) || e.Reason != definition.TooManyItems || !strings.Contains(e.Text, c.text)):
				t.Errorf("got %v, want TOO_MANY_ITEMS with %q", err, c.text)
			}
		})
	}
}
