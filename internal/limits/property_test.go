package limits_test

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"limitary/internal/chart"
	"limitary/internal/limits"
)

func TestEstimatesShiftAndScaleWithTheReadings(t *testing.T) {
	for i, d := range designs {
		r := rand.New(rand.NewPCG(uint64(i), 3))
		req := d.draw(r)
		before := mustCompute(t, req)
		for _, c := range []struct{ scale, shift float64 }{{1, 1000}, {4, 0}, {-0.5, -7}} {
			moved := mustCompute(t, mapReadings(req, func(x float64) float64 { return c.scale*x + c.shift }))
			if got, want := moved.CentreUnrounded, c.scale*before.CentreUnrounded+c.shift; !near(got, want, 1e-14) {
				t.Errorf("seed %d,3, %s, %+v: centre %.15g, want %.15g", i, d, c, got, want)
			}
			for j, e := range moved.Estimates {
				want := math.Abs(c.scale) * before.Estimates[j].Sigma
				// A shifted reading is no longer a short decimal to the last digit, hence 1e-11 and not 1e-14.
				if !near(e.Sigma, want, 1e-11) || e.DegreesOfFreedom != before.Estimates[j].DegreesOfFreedom {
					t.Errorf("seed %d,3, %s, %+v: %s %.15g, want %.15g", i, d, c, e.Name, e.Sigma, want)
				}
			}
		}
	}
}

func mapReadings(req limits.Request, f func(float64) float64) limits.Request {
	groups := make([]limits.Group, len(req.Groups))
	for i, g := range req.Groups {
		groups[i] = g
		groups[i].Readings = nil
		for _, x := range g.Readings {
			groups[i].Readings = append(groups[i].Readings, f(x))
		}
	}
	req.Groups = groups
	return req
}

func TestOrderWithinASubgroupDoesNotMatter(t *testing.T) {
	for i, d := range designs[4:] {
		r := rand.New(rand.NewPCG(uint64(i), 4))
		req := d.draw(r)
		before := mustCompute(t, req)
		shuffled := mapReadings(req, func(x float64) float64 { return x })
		for _, g := range shuffled.Groups {
			r.Shuffle(len(g.Readings), func(a, b int) { g.Readings[a], g.Readings[b] = g.Readings[b], g.Readings[a] })
		}
		r.Shuffle(len(shuffled.Groups), func(a, b int) {
			shuffled.Groups[a], shuffled.Groups[b] = shuffled.Groups[b], shuffled.Groups[a]
		})
		after := mustCompute(t, shuffled)
		if !reflect.DeepEqual(after.Location, before.Location) || !reflect.DeepEqual(after.Dispersion, before.Dispersion) || after.CentreUnrounded != before.CentreUnrounded {
			t.Errorf("seed %d,4, %s: got %s, want %s", i, d, show(after.Location), show(before.Location))
		}
	}
}

// With equal sizes the weighted estimators are the textbook's R-bar/d2 and s-bar/c4, and for two readings both are the
// same, because s is then R/√2.
func TestEqualSizesGiveTheTextbookEstimators(t *testing.T) {
	for _, n := range []int{2, 3, 9, 30} {
		req := design{chart.XbarR, n, repeat(n, 12), nil}.draw(rand.New(rand.NewPCG(uint64(n), 6)))
		res := mustCompute(t, req)
		f := factors(t, n)
		var ranges, deviations, squares float64
		for _, g := range req.Groups {
			s := plainDeviation(g.Readings)
			ranges, deviations, squares = ranges+limits.Range(g.Readings), deviations+s, squares+s*s
		}
		for name, want := range map[limits.Estimator]float64{
			limits.RBar: ranges / 12 / f[0], limits.SBar: deviations / 12 / f[2],
			// 1/(4ν) + ... of the c4 of the pooled freedom by the log-gamma route.
			limits.Pooled: math.Sqrt(squares/12) / math.Sqrt(1/(1+unbiasedVariance(float64(12*(n-1))))),
		} {
			if got := estimate(t, res, name).Sigma; !near(got, want, 1e-11) {
				t.Errorf("seed %d,6, n = %d: %s %.15g, want %.15g", n, n, name, got, want)
			}
		}
		if r, s := estimate(t, res, limits.RBar), estimate(t, res, limits.SBar); n == 2 && (!near(r.Sigma, s.Sigma, 1e-14) || !near(r.DegreesOfFreedom, s.DegreesOfFreedom, 1e-9)) {
			t.Errorf("n = 2: R-bar gives %+v, s-bar %+v, want the same", r, s)
		}
	}
}

// plainDeviation is the standard deviation by the definition, in float64.
func plainDeviation(xs []float64) float64 {
	mean, squares := 0.0, 0.0
	for _, x := range xs {
		mean += x / float64(len(xs))
	}
	for _, x := range xs {
		squares += (x - mean) * (x - mean)
	}
	return math.Sqrt(squares / float64(len(xs)-1))
}

// Unequal sizes by hand: the weights of ranges are (d2/d3)² of their sizes, from the computed columns of constants.csv:
// 1.128379167²/0.852502466² and 2.325928947²/0.864081941².
func TestUnequalRangesAreWeightedByTheirPrecision(t *testing.T) {
	res := mustCompute(t, limits.Request{Kind: chart.XbarR, SubgroupSize: 5, Groups: subgroups([]float64{10, 12}, []float64{9, 10, 11, 12, 14})})
	w2, w5 := math.Pow(1.12837916709551257/0.85250246642742173, 2), math.Pow(2.32592894728103923/0.864081941099504075, 2)
	want := (w2*2/1.12837916709551257 + w5*5/2.32592894728103923) / (w2 + w5)
	got := estimate(t, res, limits.RBar)
	if !near(got.Sigma, want, 1e-13) || !near(unbiasedVariance(got.DegreesOfFreedom), 1/(w2+w5), 1e-9) {
		t.Errorf("got %.15g at %.6f degrees of freedom, want %.15g with variance %.9f", got.Sigma, got.DegreesOfFreedom, want, 1/(w2+w5))
	}
}

// Moving ranges that share no value are ranges of two, and those are standard deviations of two readings times √2: the
// effective degrees of freedom must not depend on which of the three they are called.
func TestFreedomAgreesBetweenEquivalentEstimators(t *testing.T) {
	values := singles(5, 7, 4, 8, 1, 3)
	values[2].BreakBefore, values[4].BreakBefore = true, true
	moving := estimate(t, mustCompute(t, limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: values}), limits.MeanMovingRange)
	pairs := mustCompute(t, limits.Request{Kind: chart.XbarR, SubgroupSize: 2, Groups: subgroups([]float64{5, 7}, []float64{4, 8}, []float64{1, 3})})
	for _, name := range []limits.Estimator{limits.RBar, limits.SBar} {
		if got := estimate(t, pairs, name); !near(got.Sigma, moving.Sigma, 1e-14) || !near(got.DegreesOfFreedom, moving.DegreesOfFreedom, 1e-9) {
			t.Errorf("%s: got %.15g at %.12g, want %.15g at %.12g", name, got.Sigma, got.DegreesOfFreedom, moving.Sigma, moving.DegreesOfFreedom)
		}
	}
}

// One standard deviation of n readings has n-1 degrees of freedom, also where c4 comes from its series.
func TestFreedomIsExactForStandardDeviations(t *testing.T) {
	for _, n := range []int{2, 3, 10, 100, 500, 20_000} {
		values := make([]float64, n)
		for i := range values {
			values[i] = float64(i % 17)
		}
		res := mustCompute(t, limits.Request{Kind: chart.Individuals, SubgroupSize: 1, Groups: singles(values...)})
		if got, want := estimate(t, res, limits.Overall).DegreesOfFreedom, float64(n-1); got != want {
			t.Errorf("n = %d: got %.12g, want %g", n, got, want)
		}
	}
}

func TestComputeKeepsAndChangesNothing(t *testing.T) {
	req := designs[6].draw(rand.New(rand.NewPCG(8, 8)))
	req.Centre = ptr(10.0)
	req.Fixed[chart.Location].UpperAction = &chart.Line{Value: 20, Basis: chart.Target}
	before := fmt.Sprintf("%+v %v", req.Groups, *req.Centre)
	first := mustCompute(t, req)
	*first.Location.Centre, first.Location.UpperAction.Value = 99, 99
	if second := mustCompute(t, req); *second.Location.Centre == 99 || second.Location.UpperAction.Value == 99 {
		t.Error("changing a result changed the next")
	}
	if after := fmt.Sprintf("%+v %v", req.Groups, *req.Centre); after != before {
		t.Errorf("got %s, want %s", after, before)
	}
}

// checkOutput fails where anything in a result is not finite, out of order, or does not hold together.
func checkOutput(t *testing.T, req limits.Request) {
	t.Helper()
	res, err := limits.Compute(req)
	if err != nil {
		var refused *limits.Error
		if !errors.As(err, &refused) || refused.Field == "" || refused.Problem == "" {
			t.Fatalf("got error %v, want an *Error with field and problem", err)
		}
		return
	}
	assertFinite(t, "result", reflect.ValueOf(res))
	if res.ProcessSigma <= 0 {
		t.Errorf("process sigma %g", res.ProcessSigma)
	}
	for role, trace := range []chart.Trace{res.Location, res.Dispersion} {
		if !req.Kind.Has(chart.Role(role)) {
			continue
		}
		last := math.Inf(-1)
		for _, line := range []chart.Line{trace.LowerAction, trace.LowerWarning, {Value: *trace.Centre}, trace.UpperWarning, trace.UpperAction} {
			if line.Basis != chart.SigmaMultiple {
				continue
			}
			if line.Value <= last {
				t.Errorf("lines out of order: %s", show(trace))
			}
			last = line.Value
		}
	}
	if in := res.Intervals.Sigma; in != nil && !(in.Lower < res.SigmaUnrounded && res.SigmaUnrounded < in.Upper) {
		t.Errorf("sigma %g outside its interval %+v", res.SigmaUnrounded, *in)
	}
}

// assertFinite walks every number of a value, exported or not.
func assertFinite(t *testing.T, path string, v reflect.Value) {
	t.Helper()
	switch v.Kind() {
	case reflect.Float64:
		if x := v.Float(); math.IsNaN(x) || math.IsInf(x, 0) {
			t.Errorf("%s is %g", path, x)
		}
	case reflect.Pointer:
		if !v.IsNil() {
			assertFinite(t, path, v.Elem())
		}
	case reflect.Struct:
		for i := range v.NumField() {
			assertFinite(t, path+"."+v.Type().Field(i).Name, v.Field(i))
		}
	case reflect.Slice, reflect.Array:
		for i := range v.Len() {
			assertFinite(t, fmt.Sprintf("%s[%d]", path, i), v.Index(i))
		}
	}
}

// kindsOfReadings are all that are not counts.
var kindsOfReadings = []chart.Kind{chart.Individuals, chart.XbarR, chart.XbarS, chart.RunMeans, chart.DuplicateRange, chart.RelativeRange}

// drawnOptions makes options of duplicates, most of which go together.
func drawnOptions(r *rand.Rand, any func() *float64) (o limits.DuplicateOptions) {
	switch r.IntN(6) {
	case 0:
		o.Bands = []float64{0, *any()}
	case 1:
		o.Bands, o.Sigmas = []float64{0, *any()}, []float64{1, *any()}
	case 2:
		o.Function = true
	case 3:
		o.S0, o.B = any(), any()
	case 4:
		o.AbsoluteBelow, o.AbsoluteSigma = *any(), any()
	}
	return o
}

// Extreme but finite readings, alone and mixed with ordinary ones.
func TestFiniteInputGivesFiniteOutput(t *testing.T) {
	extremes := []float64{0, math.Copysign(0, -1), 1, -1, 0.1, 1e-15, 1e-300, math.SmallestNonzeroFloat64, 1e15, 1e99, -1e100, 1e100, 1e300, math.MaxFloat64, 1. / 3, 123456789.123456789}
	r := rand.New(rand.NewPCG(11, 12))
	for i := range 12_000 {
		kind := kindsOfReadings[r.IntN(len(kindsOfReadings))]
		req := limits.Request{Kind: kind, SubgroupSize: 1}
		if kind != chart.Individuals {
			req.SubgroupSize = 2 + r.IntN(8)
		}
		pool := extremes[:2+r.IntN(len(extremes)-1)]
		for range r.IntN(8) * (1 + r.IntN(3)) {
			g := limits.Group{Decimals: r.IntN(20) - 1, BreakBefore: r.IntN(4) == 0}
			for range 1 + r.IntN(req.SubgroupSize) {
				g.Readings = append(g.Readings, pool[r.IntN(len(pool))]*float64(1+r.IntN(3)))
			}
			req.Groups = append(req.Groups, g)
		}
		any := func() *float64 { return ptr(extremes[r.IntN(len(extremes))]) }
		for _, given := range []**float64{&req.Centre, &req.Sigma} {
			if r.IntN(4) == 0 && !(kind.Duplicates() && given == &req.Centre) {
				*given = any()
			}
		}
		switch {
		case kind == chart.RunMeans && r.IntN(4) == 0:
			req.BetweenSigma = any()
		case kind.Duplicates():
			req.Duplicates = drawnOptions(r, any)
		case r.IntN(4) == 0:
			req.Transform = chart.Transform{Kind: chart.TransformKind(1 + r.IntN(2)), Offset: *any()}
		case r.IntN(4) == 0:
			req.Levels = []chart.Level{{Reference: *any(), Sigma: *any(), Material: "m"}}
			for j := range req.Groups {
				req.Groups[j].Material = "m"
			}
		}
		if r.IntN(3) == 0 {
			req.PublishedDecimals = ptr(r.IntN(16))
		}
		checkOutput(t, req)
		if t.Failed() {
			t.Fatalf("seed 11,12, case %d: %+v", i, req)
		}
	}
}

// FuzzCompute reads a request from bytes: kind, size, decimals, flags, then readings as bits of float64, each with a byte
// of flags. Anything may be refused; nothing may panic or come out infinite.
func FuzzCompute(f *testing.F) {
	seed := func(head [4]byte, readings ...float64) {
		raw := append([]byte(nil), head[:]...)
		for _, x := range readings {
			raw = binary.LittleEndian.AppendUint64(append(raw, 0), math.Float64bits(x))
		}
		f.Add(raw)
	}
	seed([4]byte{1, 1, 255, 0}, 49.6, 47.6, 49.9, 51.3, 47.8)
	seed([4]byte{2, 3, 4, 1}, 5.1, 5.3, 5.0, 5.2, 5.4, 5.3)
	seed([4]byte{3, 2, 15, 2}, 1e100, -1e100, 1e-300, 0.1)
	seed([4]byte{4, 3, 255, 0}, 5.1, 5.3, 5.0, 5.2, 5.4, 5.3)
	seed([4]byte{5, 2, 255, 8}, 5.1, 5.3, 15.0, 15.2, 25.4, 25.3)
	seed([4]byte{6, 2, 4, 8}, 5.1, 5.3, 15.0, 15.2, 25.4, 25.3)
	seed([4]byte{3, 2, 0, 3}, math.NaN(), math.Inf(1), math.MaxFloat64)
	f.Fuzz(func(t *testing.T, raw []byte) {
		if len(raw) < 4 || len(raw) > 4+9*200 {
			return
		}
		checkOutput(t, decode(raw))
	})
}

func decode(raw []byte) limits.Request {
	req := limits.Request{Kind: append([]chart.Kind{chart.Given}, kindsOfReadings...)[raw[0]%7], SubgroupSize: int(int8(raw[1]))}
	if raw[2] < 20 {
		req.PublishedDecimals = ptr(int(raw[2]) - 1)
	}
	req.Estimator = limits.Estimator(raw[3] >> 4)
	var values []float64
	for rest := bytes.NewReader(raw[4:]); rest.Len() >= 9; {
		flags, _ := rest.ReadByte()
		var x float64
		_ = binary.Read(rest, binary.LittleEndian, &x)
		values = append(values, x)
		last := len(req.Groups) - 1
		if last < 0 || flags&1 != 0 || len(req.Groups[last].Readings) >= req.SubgroupSize {
			req.Groups = append(req.Groups, limits.Group{Decimals: int(flags>>4) - 1, BreakBefore: flags&2 != 0})
			last++
		}
		g := &req.Groups[last]
		g.Readings = append(g.Readings, x)
		if flags&12 == 12 {
			g.Excluded, g.ExclusionReason = true, "fuzz"
		}
	}
	if len(values) > 1 && raw[3]&1 != 0 {
		req.Centre = &values[0]
	}
	if len(values) > 1 && raw[3]&2 != 0 {
		req.Sigma = &values[1]
	}
	if len(values) > 3 && raw[3]&8 != 0 {
		req.Transform = chart.Transform{Kind: chart.TransformKind(raw[1] % 4), Offset: values[3]}
		req.Duplicates = limits.DuplicateOptions{Function: raw[1]&1 != 0, AbsoluteBelow: values[0], AbsoluteSigma: &values[1]}
	}
	if len(values) > 2 && raw[3]&4 != 0 {
		req.Fixed[raw[1]&1].UpperAction = &chart.Line{Value: values[2], Basis: chart.Basis(raw[2] % 6)}
	}
	return req
}
