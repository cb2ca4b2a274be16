package changetest_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"reflect"
	"strings"
	"testing"

	"limitary/internal/changetest"
	"limitary/internal/chart"
	"limitary/internal/limits"
)

func TestBadInputIsRefused(t *testing.T) {
	nan, inf := math.NaN(), math.Inf(1)
	for _, c := range []struct {
		name    string
		spoil   func(*changetest.Request)
		field   string
		problem string
	}{
		{"no kind", func(r *changetest.Request) { r.InForce.Kind = chart.Given }, "inForce.kind", "individuals"},
		{"size of individuals", func(r *changetest.Request) { r.InForce.SubgroupSize = 2 }, "inForce.subgroupSize", "size 1"},
		{"estimator of means", func(r *changetest.Request) { r.InForce.Estimator = limits.RBar }, "inForce.estimator", "does not fit"},
		{"centre NaN", func(r *changetest.Request) { r.InForce.Centre = nan }, "inForce.centre", "finite"},
		{"centre too large", func(r *changetest.Request) { r.InForce.Centre = 1.01e100 }, "inForce.centre", "1e+100"},
		{"sigma zero", func(r *changetest.Request) { r.InForce.Sigma = 0 }, "inForce.sigma", "larger than zero"},
		{"sigma negative", func(r *changetest.Request) { r.InForce.Sigma = -1 }, "inForce.sigma", "larger than zero"},
		{"sigma NaN", func(r *changetest.Request) { r.InForce.Sigma = nan }, "inForce.sigma", "larger than zero"},
		{"sigma infinite", func(r *changetest.Request) { r.InForce.Sigma = inf }, "inForce.sigma", "finite"},
		{"sigma of means of individuals", func(r *changetest.Request) { r.InForce.MeansSigma = ptr(1.0) }, "inForce.meansSigma", "no means"},
		{"between runs of individuals", func(r *changetest.Request) { r.InForce.BetweenSigma = ptr(1.0) }, "inForce.betweenSigma", "only run_means"},
		{"one old group", func(r *changetest.Request) { r.InForce.Groups, r.InForce.Readings = 1, 1 }, "inForce.groups", "2 to"},
		{"fewer readings than groups", func(r *changetest.Request) { r.InForce.Readings = 39 }, "inForce.readings", "at least one each"},
		{"more readings than groups hold", func(r *changetest.Request) { r.InForce.Readings = 41 }, "inForce.readings", "no more"},
		{"no degrees of freedom", func(r *changetest.Request) { r.InForce.DegreesOfFreedom = 0 }, "inForce.degreesOfFreedom", "0.5"},
		{"degrees of freedom NaN", func(r *changetest.Request) { r.InForce.DegreesOfFreedom = nan }, "inForce.degreesOfFreedom", "0.5"},
		{"relevance negative", func(r *changetest.Request) { r.Relevance.CentreSigmas = -0.1 }, "relevance.centreSigmas", "more than 0"},
		{"relevance above 5", func(r *changetest.Request) { r.Relevance.CentreSigmas = math.Nextafter(5, 6) }, "relevance.centreSigmas", "at most 5"},
		{"relevance NaN", func(r *changetest.Request) { r.Relevance.CentreSigmas = nan }, "relevance.centreSigmas", "at most 5"},
		{"ratio 1", func(r *changetest.Request) { r.Relevance.SigmaRatio = 1 }, "relevance.sigmaRatio", "more than 1"},
		{"ratio above 10", func(r *changetest.Request) { r.Relevance.SigmaRatio = math.Nextafter(10, 11) }, "relevance.sigmaRatio", "at most 10"},
		{"no look", func(r *changetest.Request) { r.Looks = 0 }, "looks", "this one included"},
		{"too many looks", func(r *changetest.Request) { r.Looks = changetest.LooksMax + 1 }, "looks", "10000"},
		{"trigger", func(r *changetest.Request) { r.Trigger = 2 }, "trigger", "after_signal"},
		{"reading NaN", func(r *changetest.Request) { r.Groups[3].Readings[0] = nan }, "groups[3].readings[0]", "finite"},
		{"reading infinite", func(r *changetest.Request) { r.Groups[3].Readings[0] = inf }, "groups[3].readings[0]", "finite"},
		{"reading of another unit", func(r *changetest.Request) { r.Groups[3].Readings[0] = 1.1e9 }, "groups[3].readings[0]", "same unit"},
		{"no reading", func(r *changetest.Request) { r.Groups[2].Readings = nil }, "groups[2].readings", "needs a reading"},
		{"two readings", func(r *changetest.Request) { r.Groups[2].Readings = []float64{1, 2} }, "groups[2].readings", "subgroup size"},
		{"exclusion without reason", func(r *changetest.Request) { r.Groups[1].Excluded = true }, "groups[1].exclusionReason", "reason"},
	} {
		t.Run(c.name, func(t *testing.T) {
			req := changetest.Request{InForce: standard(), Groups: groupsOf(laws[0].draw(rand.New(rand.NewPCG(1, 1)), 20), 1, 0, 1), Looks: 1}
			mustCompare(t, req)
			c.spoil(&req)
			_, err := changetest.Compare(req)
			var refused *changetest.Error
			if !errors.As(err, &refused) || refused.Field != c.field || !strings.Contains(refused.Error(), c.problem) || !strings.HasPrefix(refused.Error(), c.field) {
				t.Errorf("got %v, want a refusal of %s with %q", err, c.field, c.problem)
			}
		})
	}
}

func TestBadSigmaBetweenRunsIsRefused(t *testing.T) {
	f := standard()
	f.Kind, f.SubgroupSize, f.Estimator, f.Readings = chart.RunMeans, 3, limits.Pooled, 120
	for _, sigma := range []*float64{nil, ptr(-0.1), ptr(math.NaN()), ptr(math.Inf(1)), ptr(1e10)} {
		f.BetweenSigma = sigma
		var refused *changetest.Error
		if _, err := changetest.Compare(changetest.Request{InForce: f, Looks: 1}); !errors.As(err, &refused) || refused.Field != "inForce.betweenSigma" {
			t.Errorf("%v: got %v, want a refusal of inForce.betweenSigma", sigma, err)
		}
	}
	f.BetweenSigma = ptr(0.0)
	mustCompare(t, changetest.Request{InForce: f, Looks: 1})
}

func TestBadSigmaOfMeansIsRefused(t *testing.T) {
	req := requests(rand.New(rand.NewPCG(31, 1)))[4]
	for _, sigma := range []float64{0, -1, math.NaN(), math.Inf(1), 1e10, 1e-10} {
		req.InForce.MeansSigma = ptr(sigma)
		var refused *changetest.Error
		if _, err := changetest.Compare(req); !errors.As(err, &refused) || refused.Field != "inForce.meansSigma" {
			t.Errorf("%g: got %v, want a refusal of inForce.meansSigma", sigma, err)
		}
	}
	req.InForce.MeansSigma = ptr(0.5)
	mustCompare(t, req)
	req.InForce.CentreTarget, req.InForce.Groups = true, 0
	var refused *changetest.Error
	if _, err := changetest.Compare(req); !errors.As(err, &refused) || refused.Field != "inForce.groups" {
		t.Errorf("a sigma of the means of no groups: got %v, want a refusal of inForce.groups", err)
	}
}

// Too few results are no error: the answer says how many would do, and the estimates are there as far as they go.
func TestTooFewResults(t *testing.T) {
	for _, kind := range []chart.Kind{chart.Individuals, chart.XbarR} {
		for n := range changetest.GroupsMin {
			f, size := standard(), 1
			if kind == chart.XbarR {
				size, f.Kind, f.SubgroupSize, f.Readings, f.Estimator, f.DegreesOfFreedom = 4, kind, 4, 160, limits.RBar, 110
			}
			f.CentreTarget, f.SigmaTarget = true, true
			groups := groupsOf(laws[0].draw(rand.New(rand.NewPCG(2, 2)), n*size), size, 0, 1)
			res := mustCompare(t, changetest.Request{InForce: f, Groups: groups, Looks: 1})
			for _, c := range []*changetest.Comparison{res.Centre, res.Spread} {
				if c.Decision != changetest.NotEnoughData || c.Reason != changetest.TooFew || c.Interval != nil || c.PValid || c.Needed == nil || c.Published != nil || !c.Needed.Reachable {
					t.Errorf("%s, %d groups: got %+v", kind, n, c)
				}
				if !strings.Contains(c.Sentence, "not enough data") || !strings.Contains(c.Sentence, "would show that nothing has changed") {
					t.Errorf("%s, %d groups: got %q", kind, n, c.Sentence)
				}
			}
			if (res.Centre.Estimate != nil) != (n > 0) || (res.Spread.Estimate != nil) != (n > 1 || kind == chart.XbarR && n > 0) {
				t.Errorf("%s, %d groups: estimates %v %v", kind, n, res.Centre.Estimate, res.Spread.Estimate)
			}
			// With nothing changed and a target, t·1/√n <= 0.5 from n = 18: t is 2.1098 with 17 degrees of freedom, 2.1199
			// with 16 (printed in any table, from memory), and √17/2 = 2.06, √18/2 = 2.12. Found to a twentieth.
			if res.Centre.Needed.Groups < 18 || res.Centre.Needed.Groups > 19 {
				t.Errorf("%s: got %d groups for the centre, want 18 or so", kind, res.Centre.Needed.Groups)
			}
		}
	}
}

func TestNoSpread(t *testing.T) {
	equal := make([]float64, 20)
	coarse := make([]float64, 20) // most neighbours are equal, so their median range is zero
	coarse[7] = 1
	f := standard()
	f.Estimator = limits.MedianMovingRange
	for name, xs := range map[string][]float64{"equal": equal, "coarse": coarse} {
		res := mustCompare(t, changetest.Request{InForce: f, Groups: groupsOf(xs, 1, 0, 1), Looks: 1})
		if res.Spread.Decision != changetest.NotEnoughData || res.Spread.Reason != changetest.NoSpread || !strings.Contains(res.Spread.Sentence, "spread of zero") {
			t.Errorf("%s: got %+v", name, res.Spread)
		}
		if (res.Centre.Reason == changetest.NoSpread) != (name == "equal") {
			t.Errorf("%s: centre %+v", name, res.Centre)
		}
	}
	// No two results follow each other: moving ranges are missing, the mean is not.
	groups := groupsOf(laws[0].draw(rand.New(rand.NewPCG(3, 3)), 20), 1, 0, 1)
	for i := range groups {
		groups[i].BreakBefore = true
	}
	res := mustCompare(t, changetest.Request{InForce: standard(), Groups: groups, Looks: 1})
	if res.Spread.Reason != changetest.TooFew || res.Centre.Interval == nil || res.Correlation.Pairs != 0 {
		t.Errorf("breaks everywhere: got %+v and %+v", res.Spread, res.Centre)
	}
}

// A step in the new results makes neighbours alike; there is then no one centre to speak of.
func TestTooCorrelated(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	xs := laws[0].draw(r, 16)
	for i := range xs {
		xs[i] = xs[i]/10 + 5*float64(i/8)
	}
	res := mustCompare(t, changetest.Request{InForce: standard(), Groups: groupsOf(xs, 1, 0, 1), Looks: 1})
	if res.Centre.Decision != changetest.NotEnoughData || res.Centre.Reason != changetest.TooCorrelated || res.Centre.Needed != nil || !strings.Contains(res.Centre.Sentence, "step") {
		t.Errorf("got %+v", res.Centre)
	}
}

// No finite input leads to a figure that is not finite, whatever its size.
func TestExtremesStayFinite(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	compared := 0
	for range 20 {
		for _, req := range requests(r) {
			sigma := math.Pow(10, 200*r.Float64()-100)
			req.InForce.Sigma = sigma
			if req.InForce.BetweenSigma != nil {
				req.InForce.BetweenSigma = ptr(sigma * math.Pow(10, 12*r.Float64()-6))
			}
			req.InForce.Centre = sigma * math.Pow(10, 20*r.Float64()-10)
			req.InForce.DegreesOfFreedom = math.Pow(10, 9*r.Float64())
			req.InForce.SigmaTarget, req.InForce.CentreTarget = r.IntN(3) == 0, r.IntN(3) == 0
			wild := math.Pow(10, 16*r.Float64()-8)
			for _, g := range req.Groups {
				for j := range g.Readings {
					g.Readings[j] = req.InForce.Centre + sigma*wild*(g.Readings[j]-10)
					if r.IntN(20) == 0 {
						g.Readings[j] = req.InForce.Centre + sigma*math.Pow(10, 9*r.Float64()-1)
					}
				}
			}
			res, err := changetest.Compare(req)
			var refused *changetest.Error
			if err != nil && !errors.As(err, &refused) {
				t.Fatal(err)
			}
			if err == nil {
				compared++
				allFinite(t, reflect.ValueOf(res), "result")
			}
		}
	}
	if compared < 130 {
		t.Errorf("only %d requests were compared", compared)
	}
}

// allFinite walks all figures; the degrees of freedom of a target, and they alone, have no end.
func allFinite(t *testing.T, v reflect.Value, path string) {
	t.Helper()
	switch v.Kind() {
	case reflect.Float64:
		if x := v.Float(); math.IsNaN(x) || math.IsInf(x, 0) && !strings.Contains(path, "Freedom") {
			t.Errorf("%s is %g", path, x)
		}
	case reflect.Pointer:
		if !v.IsNil() {
			allFinite(t, v.Elem(), path)
		}
	case reflect.Struct:
		for i := range v.NumField() {
			allFinite(t, v.Field(i), path+"."+v.Type().Field(i).Name)
		}
	}
}

func TestCompareLeavesItsInputAlone(t *testing.T) {
	make := func() []changetest.Request { return requests(rand.New(rand.NewPCG(6, 6))) }
	given, kept := make(), make()
	for i, req := range given {
		mustCompare(t, req)
		if !reflect.DeepEqual(req, kept[i]) {
			t.Errorf("request %d was changed", i)
		}
	}
}
