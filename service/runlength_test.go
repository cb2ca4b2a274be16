package service_test

import (
	"context"
	"errors"
	"math"
	"strings"
	"sync"
	"testing"
	"time"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"
	"google.golang.org/protobuf/proto"

	pb "limitary/api/limitary/v1"
	"limitary/internal/definition"
	"limitary/internal/runlength/effort"
	"limitary/service"
)

func runLength(t testing.TB, text string) (*pb.RunLengthResponse, error) {
	t.Helper()
	return (&service.RuleService{}).RunLength(context.Background(), message(t, text, &pb.RunLengthRequest{}))
}

func mustRunLength(t testing.TB, text string) *pb.RunLengthResponse {
	t.Helper()
	got, err := runLength(t, text)
	if err != nil {
		t.Fatalf("%s: %v", text, err)
	}
	return got
}

// The figures are those of testdata/arl.csv, computed by other programs.
func TestRunLengthOfAPublishedSet(t *testing.T) {
	got := mustRunLength(t, `{"ruleSet": "western-electric-1956", "shifts": [0, 1], "horizonsPoints": [1, 50]}`)
	want := []float64{91.75077313, 9.219}
	for i, row := range got.Rows {
		tolerance := 1e-9
		if i == 1 {
			tolerance = 1e-3 // a simulation in the note of that row
		}
		if math.Abs(row.Arl/want[i]-1) > tolerance || row.Computation != pb.Computation_COMPUTATION_EXACT || !(row.ErrorBound < 1e-9) {
			t.Errorf("row %d: ARL %v by %v, bound %v; want %v", i, row.Arl, row.Computation, row.ErrorBound, want[i])
		}
		if len(row.Within) != 2 || row.Within[1].Points != 50 || len(row.Quantiles) != 3 || row.Quantiles[1].Probability != 0.5 || row.StandardError != nil {
			t.Errorf("row %d: %v", i, row)
		}
	}
	if got.States != 215 || len(got.EndingRules) != 4 || got.Judge != 1 || got.ShiftUnit != pb.ShiftUnit_SHIFT_UNIT_STANDARD_ERRORS {
		t.Errorf("got %d states, rules %v, judge %d, unit %v; want 215 states (as the file says) and four rules", got.States, got.EndingRules, got.Judge, got.ShiftUnit)
	}
}

func TestRunLengthOfAWholeChart(t *testing.T) {
	got := mustRunLength(t, `{"kind": "CHART_KIND_INDIVIDUALS",
		"location": {"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 1, "m": 1, "z": 3}}]},
		"dispersion": {"rules": [{"id": "b", "consequence": "CONSEQUENCE_ACT", "sides": "SIDES_UPPER", "beyondLine": {"line": "LINE_KIND_ACTION"}}], "lines": {"absent": ["lower_action"]}},
		"rates": true, "workload": {"tracks": 10, "pointsPerDay": 2}}`)
	row := got.Rows[0]
	if math.Abs(row.Arl-105.33) > 0.01 { // 105 is common knowledge of the trade; two methods agree in package runlength
		t.Errorf("ARL %v, want 105.33", row.Arl)
	}
	flagged, opened := row.Rates.PointsFlaggedPer_1000, row.Rates.SignalsOpenedPer_1000
	if !(flagged > 9 && flagged < 12 && opened > 9) || len(row.Rates.Rules) != 2 || row.Rates.Rules[1].Trace != pb.TraceRole_TRACE_ROLE_DISPERSION {
		t.Errorf("rates %v", row.Rates)
	}
	if w := row.Workload; w.PointsPerWeek != 140 || math.Abs(w.SignalsPerWeek-0.14*opened) > 1e-9 || math.Abs(w.PointsFlaggedPerWeek-0.14*flagged) > 1e-9 {
		t.Errorf("workload %v of rates %v and %v", w, opened, flagged)
	}
}

func TestRunLengthStudies(t *testing.T) {
	got := mustRunLength(t, `{"ruleSet": "western-electric-1956", "shifts": [0, 1], "marginalTable": true,
		"choice": {"inControlArlMin": 150, "shift": 1, "basisPoints": 60}, "realLimits": {"basisPoints": 30, "shift": 1, "powerPoints": 5}}`)
	if len(got.MarginalTable) != 4 || len(got.MarginalTable[3].Shifted) != 1 || math.Abs(got.MarginalTable[3].InControl.Arl-got.Rows[0].Arl) > 1e-9 {
		t.Errorf("marginal table %v", got.MarginalTable)
	}
	if len(got.Candidates) != 19 || got.Candidates[0].Rank != 1 || !got.Candidates[0].WithinBudget {
		t.Errorf("%d candidates, the first %v", len(got.Candidates), got.Candidates[0])
	}
	r := got.RealLimits
	if !(r.Arl.Low < r.Arl.Median && r.Arl.Median < r.Arl.High && r.Power.Low < r.NominalPower && r.GetPointsNeeded() > 30) || r.Assurance != 0.9 || r.Factor != 1.5 {
		t.Errorf("real limits %v", r)
	}
}

func TestRunLengthRefusals(t *testing.T) {
	const limit = `"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 1, "m": 1, "z": 3}}]`
	for _, c := range []struct{ name, request, field, text string }{
		{"no rules", `{}`, "rules", "no rules"},
		{"k above m", `{"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "beyond": {"k": 3, "m": 2, "z": 3}}]}`, "rules[0].beyond.k", "1 to m, which is 2"},
		{"lambda", `{"location": {"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "ewma": {"lambda": 1.5, "limit": 3}}]}}`, "location.rules[0].ewma.lambda", "at most 1"},
		{"twice the same id", `{"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "sameSide": {"n": 8}}, {"id": "a", "consequence": "CONSEQUENCE_ACT", "sameSide": {"n": 9}}]}`, "rules[1].id", "rules[0]"},
		{"horizon 0", `{"ruleSet": "western-electric-1956", "horizonsPoints": [0]}`, "horizons_points[0]", "1 to"},
		{"only milder rules", `{"rules": [{"id": "a", "consequence": "CONSEQUENCE_LOOK", "sameSide": {"n": 8}}]}`, "consequence", "ACT"},
		{"negative sigma ratio", `{` + limit + `, "sigmaRatio": -1}`, "sigma_ratio", "0.01 to 100"},
		{"sigma ratio 0", `{` + limit + `, "sigmaRatio": 0}`, "sigma_ratio", "0.01 to 100"},
		{"an unknown set", `{"ruleSet": "house-rules"}`, "rule_set", "house-rules"},
		{"rules and a set", `{` + limit + `, "ruleSet": "nelson-1984"}`, "rule_set", "one of the two"},
		{"rules and a location", `{` + limit + `, "location": {"ruleSet": "nelson-1984"}}`, "location", "once"},
		{"two traces without a kind", `{` + limit + `, "dispersion": {` + limit + `}}`, "dispersion", "kind"},
		{"an unknown absent line", `{"location": {` + limit + `, "lines": {"absent": ["middle"]}}}`, "location.lines.absent", "middle"},
		{"a line too far out", `{"location": {` + limit + `, "lines": {"upperAction": 1000}}}`, "location.lines.upper_action", "100"},
		{"no tracks", `{` + limit + `, "workload": {"pointsPerDay": 1}}`, "workload.tracks", "1 to"},
		{"a shape without its number", `{` + limit + `, "data": {"shape": "DATA_SHAPE_STUDENT"}}`, "data.degrees_of_freedom", "more than 2"},
		{"a number without its shape", `{` + limit + `, "data": {"gammaShape": 3}}`, "data.shape", "GAMMA"},
	} {
		t.Run(c.name, func(t *testing.T) {
			_, err := runLength(t, c.request)
			var e *definition.Error
			if !errors.As(err, &e) || e.Field != c.field || !strings.Contains(e.Text, c.text) {
				t.Errorf("got %v, want a refusal of %s that says %q", err, c.field, c.text)
			}
		})
	}
}

func TestRunLengthCostIsLimited(t *testing.T) {
	_, err := service.AnswerRunLength(effort.New(context.Background(), 1000), message(t, `{"ruleSet": "nelson-1984"}`, &pb.RunLengthRequest{}), nil)
	var e *definition.Error
	if !errors.As(err, &e) || e.Reason != definition.TooManyItems || !strings.Contains(e.Text, "limit") {
		t.Errorf("got %v, want the cost limit", err)
	}
}

// More calls than may wait are told to come back; those that wait leave with their context.
func TestRunLengthsCannotPileUp(t *testing.T) {
	long := message(t, `{"rules": [{"id": "a", "consequence": "CONSEQUENCE_ACT", "cusum": {"k": 0.5, "h": 9}}, {"id": "b", "consequence": "CONSEQUENCE_ACT", "sameSide": {"n": 16}}], "simulationRuns": 10000000}`, &pb.RunLengthRequest{})
	ctx, stop := context.WithCancel(context.Background())
	const calls = 200
	errs := make(chan error, calls)
	var group sync.WaitGroup
	for range calls {
		group.Go(func() {
			_, err := (&service.RuleService{}).RunLength(ctx, proto.Clone(long).(*pb.RunLengthRequest))
			errs <- err
		})
	}
	refused := 0
	for refused < calls-100 { // far more than can be waiting or in work are refused, without waiting for the others
		if err := <-errs; status.Code(err) != codes.ResourceExhausted {
			t.Fatalf("got %v, want RESOURCE_EXHAUSTED", err)
		}
		refused++
	}
	stop()
	group.Wait()
	close(errs)
	ended := 0
	for err := range errs {
		switch {
		case errors.Is(err, context.Canceled):
			ended++
		case status.Code(err) != codes.ResourceExhausted:
			t.Errorf("got %v, want RESOURCE_EXHAUSTED or the context's end", err)
		}
	}
	if ended == 0 {
		t.Error("no call was in work or waiting")
	}
	quick, leave := context.WithTimeout(context.Background(), time.Minute)
	defer leave()
	if _, err := (&service.RuleService{}).RunLength(quick, message(t, `{"ruleSet": "shewhart-1931"}`, &pb.RunLengthRequest{})); err != nil {
		t.Errorf("afterwards: %v", err)
	}
}
