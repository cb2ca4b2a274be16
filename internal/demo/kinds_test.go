package demo_test

import (
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	pb "limitary/api/limitary/v1"
)

const stopped = pb.Standing_STANDING_STOP

// all gives the results of a chart in the order they were measured.
func (s *served) all(t *testing.T, chart string) []*pb.StoredResult {
	t.Helper()
	out, err := pb.NewEvaluationServiceClient(s.conn).ListResults(as(t, s.tokens.Reviewer), &pb.ListResultsRequest{Chart: chart, PageSize: 1000})
	if err != nil || out.NextPageToken != "" {
		t.Fatalf("chart %s: %v, or more than a page", chart, err)
	}
	slices.SortFunc(out.Results, func(a, b *pb.StoredResult) int { return strings.Compare(a.Result.SourceId, b.Result.SourceId) })
	return out.Results
}

// wantOnlyStop makes sure that of the judged results, those from an index on, one alone stopped, and that somebody closed
// its signal and released the track.
func (s *served) wantOnlyStop(t *testing.T, results []*pb.StoredResult, from int, id, rule string) {
	t.Helper()
	for _, r := range results[from:] {
		if want := r.Result.SourceId == id; r.Verdict.Version != 1 || (r.Verdict.Standing == stopped) != want {
			t.Errorf("%s: got %s by version %d, want a stop: %v", r.Result.SourceId, r.Verdict.Standing, r.Verdict.Version, want)
		}
	}
	name := results[0].Result.Chart
	closed, open := s.signalsOf(t, name, "", pb.SignalStatus_SIGNAL_STATUS_CLOSED), s.signalsOf(t, name, "", pb.SignalStatus_SIGNAL_STATUS_OPEN)
	if !hasRule(closed, rule) || len(open) != 0 {
		t.Errorf("got closed signals %v and open ones %v, want one of %s closed", closed, open, rule)
	}
	if tr := s.track(t, name, ""); tr.State != pb.TrackState_TRACK_STATE_CLEAR || tr.Version != 1 {
		t.Errorf("got %v, want it clear under version 1", tr)
	}
}

func values(t *testing.T, r *pb.StoredResult) []float64 {
	t.Helper()
	out := make([]float64, len(r.Result.Readings))
	for i, text := range r.Result.Readings {
		x, err := strconv.ParseFloat(text, 64)
		if err != nil {
			t.Fatal(err)
		}
		out[i] = x
	}
	return out
}

// testStoriesOfKinds looks at the charts of other kinds. Each verdict is found again by adding up the law of the chart
// from its definition, or by hand from the readings.
func testStoriesOfKinds(t *testing.T, s *served) {
	t.Run("a week of failed plates stopped", func(t *testing.T) { testPlates(t, s) })
	t.Run("a filter with hardly a colony stopped", func(t *testing.T) { testColonies(t, s) })
	t.Run("pairs go by the band of their mean, and one failed", func(t *testing.T) { testPairs(t, s) })
	t.Run("run means have lines that limits of subgroups have not", func(t *testing.T) { testRuns(t, s) })
	t.Run("low turbidity is judged on a log scale", func(t *testing.T) { testLogScale(t, s) })
}

// actionTail is what an exact action line leaves beyond it at most.
const actionTail = 0.00135

// tailsOf adds up a law given by its first probability and the ratio of each to the one before: P(X < k) and P(X > k).
func tailsOf(k int, first float64, ratio func(k int) float64) (below, above float64) {
	p, at := first, 0.0
	for i := 0; i <= k; i++ {
		if i > 0 {
			p *= ratio(i)
		}
		below, at = below+at, p
	}
	return below, 1 - below - at
}

func binomial(n, p float64) func(k int) (below, above float64) {
	return func(k int) (float64, float64) {
		return tailsOf(k, math.Pow(1-p, n), func(i int) float64 { return (n - float64(i) + 1) / float64(i) * p / (1 - p) })
	}
}

func poisson(mean float64) func(k int) (below, above float64) {
	return func(k int) (float64, float64) {
		return tailsOf(k, math.Exp(-mean), func(i int) float64 { return mean / float64(i) })
	}
}

// exactly gives the greatest and the least whole count beyond which at most the tail lies, below and above.
func exactly(law func(k int) (below, above float64)) (lower, upper int) {
	for _, above := law(upper); above > actionTail; _, above = law(upper) {
		upper++
	}
	for below, _ := law(lower); below <= actionTail; below, _ = law(lower) {
		lower++
	}
	return lower - 1, upper
}

func testPlates(t *testing.T, s *served) {
	const incident, setup = "BR-PLATE-0046", 30
	results, v := s.all(t, "plates-failed"), s.version(t, "plates-failed", 1)
	if len(results) != 56 {
		t.Fatalf("got %d weeks, want 56", len(results))
	}
	failed, plates := 0.0, 0.0
	for _, r := range results[:setup] {
		failed, plates = failed+r.Result.Count.Nonconforming, plates+r.Result.Count.Inspected
	}
	if got := v.Location.GetCentre(); math.Abs(got-failed/plates) > 0.5e-5+1e-12 || v.Model.CountMethod != pb.CountMethod_COUNT_METHOD_EXACT {
		t.Errorf("got centre %v with %v, want %v of %v plates with exact lines", got, v.Model, failed, plates)
	}
	beyond := 0
	for _, r := range results[setup:] {
		n, k := r.Result.Count.Inspected, int(r.Result.Count.Nonconforming)
		_, upper := exactly(binomial(n, v.Location.GetCentre()))
		if got := r.Verdict.Location.GetUpperAction(); math.Abs(got-float64(upper)/n) > 0.5e-5+1e-12 {
			t.Errorf("%s: got the upper line at %v, want %d of %v plates", r.Result.SourceId, got, upper, n)
		}
		if k > upper {
			beyond++
		}
	}
	if beyond != 1 {
		t.Errorf("got %d weeks beyond their line, want one", beyond)
	}
	s.wantOnlyStop(t, results, setup, incident, "plates")
}

func testColonies(t *testing.T, s *served) {
	const setup = 40
	results, v := s.all(t, "ecoli-reference"), s.version(t, "ecoli-reference", 1)
	sum := 0.0
	for _, r := range results[:setup] {
		sum += r.Result.Count.Nonconforming
	}
	if got := v.Location.GetCentre(); math.Abs(got-sum/setup) > 1e-9 || got < 12 || got > 20 {
		t.Errorf("got centre %v, want %v, between 12 and 20", got, sum/setup)
	}
	lower, upper := exactly(poisson(sum / setup))
	if l := v.Location; l.LowerAction.GetValue() != float64(lower) || l.UpperAction.GetValue() != float64(upper) || l.LowerAction.Basis != pb.Basis_BASIS_TAIL_PROBABILITY {
		t.Errorf("got action lines %v and %v, want %d and %d", l.LowerAction, l.UpperAction, lower, upper)
	}
	for _, r := range results[setup:] {
		k := int(r.Result.Count.Nonconforming)
		if beyond := k < lower || k > upper; beyond != (r.Verdict.Standing == stopped) {
			t.Errorf("%s: got %s for %d colonies between %d and %d", r.Result.SourceId, r.Verdict.Standing, k, lower, upper)
		}
	}
	s.wantOnlyStop(t, results, setup, "BR-ECREF-0075", "count")
}

func testPairs(t *testing.T, s *served) {
	const setup = 100
	// The mean and the standard deviation of the range of two standard normal readings.
	rangeMean, rangeSigma := 2/math.Sqrt(math.Pi), math.Sqrt(2-4/math.Pi)
	results, v := s.all(t, "nitrate-ic2-pairs"), s.version(t, "nitrate-ic2-pairs", 1)
	bands := v.Model.GetSpread().GetBands()
	if len(bands) != 4 || v.Location != nil || v.Dispersion.LowerAction.Basis != pb.Basis_BASIS_ABSENT || v.Provisional {
		t.Fatalf("got bands %v, location %v, dispersion %v; want four bands with upper lines", bands, v.Location, v.Dispersion)
	}
	judged := map[float64]int{}
	for i, r := range results {
		x := values(t, r)
		mean, apart := (x[0]+x[1])/2, math.Abs(x[0]-x[1])
		if mean < 0.5 || mean > 45 {
			t.Errorf("%s: got mean %v, want 0.5 to 45 mg/L", r.Result.SourceId, mean)
		}
		band := bands[0]
		for _, b := range bands {
			if mean >= b.From {
				band = b
			}
		}
		if i < setup {
			continue
		}
		line := (rangeMean + 3*rangeSigma) * band.Sigma
		if got := r.Verdict.Dispersion.GetUpperAction(); math.Abs(got-line) > 0.5e-5+1e-9 || apart > line != (r.Verdict.Standing == stopped) {
			t.Errorf("%s: got line %v and %s for a difference of %v, want line %v", r.Result.SourceId, got, r.Verdict.Standing, apart, line)
		}
		judged[band.From]++
	}
	for _, b := range bands {
		if judged[b.From] < 5 {
			t.Errorf("got %d pairs judged in the band from %v, want some in each", judged[b.From], b.From)
		}
	}
	s.wantOnlyStop(t, results, setup, "HW-NO3P-0142", "pair")
}

func testRuns(t *testing.T, s *served) {
	const setup, eluent = 40, "OS-SO4-0084"
	results, v := s.all(t, "sulfate-ic3-runs"), s.version(t, "sulfate-ic3-runs", 1)
	points := make([]*pb.Point, setup)
	for i := range points {
		points[i] = &pb.Point{Value: &pb.Point_Readings{Readings: &pb.Readings{Values: values(t, results[i])}}}
	}
	subgroups, err := pb.NewLimitServiceClient(s.conn).ComputeLimits(as(t, s.tokens.Reviewer), &pb.ComputeLimitsRequest{
		Kind: pb.ChartKind_CHART_KIND_XBAR_S, SubgroupSize: 3, Data: &pb.ComputeLimitsRequest_Points{Points: &pb.Points{Points: points}},
	})
	if err != nil {
		t.Fatal(err)
	}
	sound := len(results) - setup - 1
	falseAlarms := 0
	for _, r := range results[setup:] {
		x := values(t, r)
		mean := (x[0] + x[1] + x[2]) / 3
		if r.Result.SourceId != eluent && (mean < subgroups.Location.LowerAction.GetValue() || mean > subgroups.Location.UpperAction.GetValue()) {
			falseAlarms++
		}
	}
	share, spread := float64(falseAlarms)/float64(sound), math.Sqrt(0.25*0.75/float64(sound))
	if !strings.Contains(v.Reason, "one run in four") || math.Abs(share-0.25) > 2*spread {
		t.Errorf("xbar lines would signal in %d of %d sound runs, want about one in four, as the reason says: %q", falseAlarms, sound, v.Reason)
	}
	within, between := v.ProcessSigma, v.Model.BetweenSigma
	if want := math.Sqrt(between*between + within*within/3); between < within || math.Abs(v.Location.GetSigma()-want) > 1e-12 {
		t.Errorf("got sigma %v of a run mean, want %v from %v within and %v between", v.Location.GetSigma(), want, within, between)
	}
	s.wantOnlyStop(t, results, setup, eluent, "run-mean")
}

func testLogScale(t *testing.T, s *served) {
	const setup, scratched = 50, "BR-TURBL-0093"
	results, v := s.all(t, "turbidity-low"), s.version(t, "turbidity-low", 1)
	plain := &pb.Series{}
	for _, r := range results[:setup] {
		plain.Values = append(plain.Values, values(t, r)[0])
	}
	in := &pb.ComputeLimitsRequest{Kind: pb.ChartKind_CHART_KIND_INDIVIDUALS, SubgroupSize: 1, Data: &pb.ComputeLimitsRequest_Series{Series: plain}}
	untransformed, err := pb.NewLimitServiceClient(s.conn).ComputeLimits(as(t, s.tokens.Reviewer), in)
	if err != nil {
		t.Fatal(err)
	}
	centre, sigma, shown := v.Location.GetCentre(), v.Location.GetSigma(), v.Location.Original
	// The lines are rounded on the log scale, to four decimals.
	if lower, upper := math.Exp(centre-3*sigma), math.Exp(centre+3*sigma); math.Abs(shown.GetLowerAction()/lower-1) > 1e-4 || math.Abs(shown.GetUpperAction()/upper-1) > 1e-4 {
		t.Errorf("got %v, want %v and %v", shown, lower, upper)
	}
	if l := untransformed.Location; l.LowerAction.GetValue() >= shown.GetLowerAction() || l.UpperAction.GetValue() >= shown.GetUpperAction() {
		t.Errorf("got plain lines %v and %v, want both below %v, as the reason says", l.LowerAction, l.UpperAction, shown)
	}
	high := s.result(t, "turbidity-low", "lims-brenmoor", scratched).Result
	if x := values(t, high)[0]; x <= math.Exp(centre+3*sigma) || math.Abs(high.Verdict.Location.GetOriginal().GetStatistic()/x-1) > 1e-3 {
		t.Errorf("got %v, want a reading above the line, shown as it was read", high)
	}
	s.wantOnlyStop(t, results, setup, scratched, "run-of-seven/1")
}
