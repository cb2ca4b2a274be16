package main

import (
	"math"
	"testing"

	pb "limitary/api/limitary/v1"
)

func kindCases() []kindCase {
	counted := []string{"Process sigma", "Dispersion trace"}
	return append(readingCases(), []kindCase{
		{"p", "plates-failed.csv", []string{"--value", "failed", "--inspected", "plates"}, []string{"--kind", "p"}, wantP,
			[]string{"p chart (fraction of nonconforming items)", "items a sample       302 to 596", "781 of 18140 items",
				"Every sample has lines of its own", "What lies beyond the lines while nothing is wrong", "COUNTS_OVERDISPERSED"}, counted},
		{"p, exact", "plates-failed.csv", []string{"--value", "failed", "--inspected", "plates"}, []string{"--kind", "p", "--count-method", "exact"}, wantPExact,
			[]string{"exact: ", "if counts are binomial"}, counted},
		{"np", "batches-of-50.csv", []string{"--value", "failed"}, []string{"--kind", "np", "--size", "50"}, wantNP,
			[]string{"subgroup size  50 items", "129 in 40 samples", "lower action      none  no such line: no count leaves as little as 0.00135"},
			append([]string{"Every sample has"}, counted...)},
		{"c", "blank-colonies.csv", []string{"--value", "colonies"}, []string{"--kind", "c"}, wantC,
			[]string{"inspection units a sample  1", "if counts are Poisson"}, counted},
		{"u, one factor", "filter-colonies.csv", []string{"--value", "colonies", "--inspected", "volume_100_mL"}, []string{"--kind", "u", "--extra", "factor"}, wantUFactor,
			[]string{"2368 in 94 inspection units", "Laney 2002"}, append([]string{"What lies beyond"}, counted...)},
		{"u, between samples", "filter-colonies.csv", []string{"--value", "colonies", "--inspected", "volume_100_mL"}, []string{"--kind", "u", "--extra", "between"}, wantUBetween,
			[]string{"Components of variance", "BETWEEN", "from the centre, by counting"}, counted},
	}...)
}

func readingCases() []kindCase {
	pair := []string{"--value", "a_mg_per_L,b_mg_per_L"}
	levels := []string{"--kind", "individuals", "--level", "low=2.5,0.1", "--level", "mid=10,0.3", "--level", "high=40,1"}
	noLocation := []string{"Location trace", "False alarms"}
	return []kindCase{
		{"run_means", "nitrate-runs.csv", []string{"--value", "nitrate_mg_per_L", "--subgroup", "run"}, []string{"--kind", "run_means", "--time", "measured"}, wantRuns,
			[]string{"weighted mean of 30 runs", "Components of variance", "WITHIN", "BETWEEN", "TOTAL", "more readings lessen the part within runs only", "30 runs used, 120 readings"}, nil},
		{"duplicate_range", "nitrate-duplicates.csv", pair, []string{"--kind", "duplicate_range"}, wantDuplicates,
			[]string{"60 sets of replicates used", "replicates are watched for differing too much only"}, noLocation},
		{"duplicate_range in bands", "nitrate-duplicates.csv", pair, []string{"--kind", "duplicate_range", "--bands", "0,8,40"}, wantBands,
			[]string{"Sigma of a single reading by the mean of its set", "BAND", "that of the band in which the mean"}, noLocation},
		{"relative_range", "nitrate-duplicates.csv", pair, []string{"--kind", "relative_range"}, wantRelative,
			[]string{"in percent of their mean", "a single reading in percent of the mean"}, noLocation},
		{"log scale", "turbidity.csv", []string{"--value", "turbidity_NTU"}, []string{"--kind", "individuals", "--scale", "log"}, wantLog,
			[]string{"judged scale  natural logarithm of reading", "centre (median in the unit)", "in the unit", "before the scale is taken"}, nil},
		{"square roots, one side", "turbidity.csv", []string{"--value", "turbidity_NTU"}, []string{"--kind", "individuals", "--scale", "sqrt", "--one-sided", "upper"}, wantRootUpper,
			[]string{"no such line: left out", "Only the upper side of the location trace is watched"}, nil},
		{"levels", "lead-levels.csv", []string{"--value", "lead_ug_per_L", "--material", "material"}, levels, wantLevels,
			[]string{"(reading - reference)/sigma of the level, 3 levels", "standardised mean", "A result of another material is not judged"}, []string{"The 60 readings used"}},
	}
}

func wantP(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse) wanted {
	k, n := numbers(t, c["failed"]), numbers(t, c["plates"])
	p := sum(k) / sum(n)
	if size := sum(n) / float64(len(n)); math.Abs(got.Model.Inspected-size) > 0.5 {
		t.Errorf("lines are published for %v items, want the mean, %v", got.Model.Inspected, size)
	}
	reach := func(n float64) float64 { return 3 * math.Sqrt(p*(1-p)/n) }
	at := func(i int) (x, lower, upper float64) { return k[i] / n[i], p - reach(n[i]), p + reach(n[i]) }
	size := got.Model.Inspected
	return wanted{location, p, p - reach(size), p + reach(size), at, len(k)}
}

func wantPExact(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse) wanted {
	k, n := numbers(t, c["failed"]), numbers(t, c["plates"])
	p := sum(k) / sum(n)
	at := func(i int) (x, lower, upper float64) {
		lower, upper = exactLines(binomialMass(n[i], p), n[i])
		return k[i], lower, upper
	}
	size := got.Model.Inspected
	lower, upper := exactLines(binomialMass(size, p), size)
	return wanted{location, p, lower / size, upper / size, at, len(k)}
}

func wantNP(t *testing.T, c map[string][]string, _ *pb.ComputeLimitsResponse) wanted {
	k := numbers(t, c["failed"])
	mean := sum(k) / float64(len(k))
	lower, upper := exactLines(binomialMass(50, mean/50), 50)
	return flat(location, k, mean, lower, upper)
}

func wantC(t *testing.T, c map[string][]string, _ *pb.ComputeLimitsResponse) wanted {
	k := numbers(t, c["colonies"])
	mean := sum(k) / float64(len(k))
	lower, upper := exactLines(poissonMass(mean), 200)
	return flat(location, k, mean, lower, upper)
}

// rates are the lines of u charts with a variance of their own for each size.
func rates(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse, variance func(u, n float64) float64) wanted {
	k, n := numbers(t, c["colonies"]), numbers(t, c["volume_100_mL"])
	u := sum(k) / sum(n)
	reach := func(n float64) float64 { return 3 * math.Sqrt(variance(u, n)) }
	at := func(i int) (x, lower, upper float64) { return k[i] / n[i], u - reach(n[i]), u + reach(n[i]) }
	size := got.Model.Inspected
	return wanted{location, u, u - reach(size), u + reach(size), at, len(k)}
}

// The factor is the mean moving range of the standardised rates over d2 (Laney 2002).
func wantUFactor(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse) wanted {
	k, n := numbers(t, c["colonies"]), numbers(t, c["volume_100_mL"])
	u := sum(k) / sum(n)
	z := make([]float64, len(k))
	for i := range z {
		z[i] = (k[i]/n[i] - u) / math.Sqrt(u/n[i])
	}
	_, factor := movingRanges(z)
	if math.Abs(got.Model.Inflation/factor-1) > 1e-3 {
		t.Errorf("factor: got %v, want %v", got.Model.Inflation, factor)
	}
	factor = got.Model.Inflation // as published: at these rates its rounding moves a line by more than the last digit
	return rates(t, c, got, func(u, n float64) float64 { return factor * factor * u / n })
}

// The expectation of Σn(u - ū)² is (k - 1)·ū + (Σn - Σn²/Σn)·s_b², solved for s_b².
func wantUBetween(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse) wanted {
	k, n := numbers(t, c["colonies"]), numbers(t, c["volume_100_mL"])
	u, q, squares := sum(k)/sum(n), 0.0, 0.0
	for i := range k {
		q += n[i] * (k[i]/n[i] - u) * (k[i]/n[i] - u)
		squares += n[i] * n[i]
	}
	between := (q - float64(len(k)-1)*u) / (sum(n) - squares/sum(n))
	if math.Abs(got.Model.BetweenSigma-math.Sqrt(between)) > 0.001 {
		t.Errorf("sigma between samples: got %v, want %v", got.Model.BetweenSigma, math.Sqrt(between))
	}
	return rates(t, c, got, func(u, n float64) float64 { return u/n + between })
}

// One-way analysis of variance of 30 runs of 4: the mean square of the runs is that of run means times 4.
func wantRuns(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse) wanted {
	const size = 4
	xs := numbers(t, c["nitrate_mg_per_L"])
	means, within := make([]float64, len(xs)/size), 0.0
	for i := range means {
		run := xs[i*size : (i+1)*size]
		means[i] = sum(run) / size
		for _, x := range run {
			within += (x - means[i]) * (x - means[i])
		}
	}
	within /= float64(len(means) * (size - 1))
	grand, squares := sum(means)/float64(len(means)), 0.0
	for _, m := range means {
		squares += (m - grand) * (m - grand)
	}
	variance := squares / float64(len(means)-1) // of a run mean, between and within together
	if between := math.Sqrt(variance - within/size); math.Abs(got.Model.BetweenSigma-between) > 0.0002 {
		t.Errorf("sigma between runs: got %v, want %v", got.Model.BetweenSigma, between)
	}
	// POOLED is divided by c4(91) = 0.9972: the lines follow from the published figures, so sigma is taken from them.
	reach := 3 * math.Sqrt(got.Model.BetweenSigma*got.Model.BetweenSigma+got.ProcessSigma*got.ProcessSigma/size)
	if math.Abs(reach/3/math.Sqrt(variance)-1) > 0.002 {
		t.Errorf("sigma of a run mean: got %v, want about %v", reach/3, math.Sqrt(variance))
	}
	return flat(location, means, grand, grand-reach, grand+reach)
}

// pairs gives ranges and means of the duplicates.
func pairs(t *testing.T, c map[string][]string) (ranges, means []float64) {
	a, b := numbers(t, c["a_mg_per_L"]), numbers(t, c["b_mg_per_L"])
	for i := range a {
		ranges, means = append(ranges, math.Abs(a[i]-b[i])), append(means, (a[i]+b[i])/2)
	}
	return ranges, means
}

// aboveRange is the upper action line of ranges of two: R̄·(1 + 3·d3/d2).
func aboveRange(mean float64) float64 { return mean * (1 + 3*rangeSigma/rangeMean) }

func wantDuplicates(t *testing.T, c map[string][]string, _ *pb.ComputeLimitsResponse) wanted {
	ranges, _ := pairs(t, c)
	mean := sum(ranges) / float64(len(ranges))
	return flat(dispersion, ranges, mean, math.NaN(), aboveRange(mean))
}

func wantRelative(t *testing.T, c map[string][]string, _ *pb.ComputeLimitsResponse) wanted {
	ranges, means := pairs(t, c)
	for i := range ranges {
		ranges[i] *= 100 / means[i]
	}
	mean := sum(ranges) / float64(len(ranges))
	return flat(dispersion, ranges, mean, math.NaN(), aboveRange(mean))
}

func wantBands(t *testing.T, c map[string][]string, _ *pb.ComputeLimitsResponse) wanted {
	ranges, means := pairs(t, c)
	band := func(i int) int {
		switch {
		case means[i] < 8:
			return 0
		case means[i] < 40:
			return 1
		}
		return 2
	}
	var total, n [3]float64
	for i, r := range ranges {
		total[band(i)] += r
		n[band(i)]++
	}
	at := func(i int) (x, lower, upper float64) {
		return ranges[i], math.NaN(), aboveRange(total[band(i)] / n[band(i)])
	}
	return wanted{dispersion, total[0] / n[0], math.NaN(), aboveRange(total[0] / n[0]), at, len(ranges)}
}

func wantLog(t *testing.T, c map[string][]string, got *pb.ComputeLimitsResponse) wanted {
	xs := numbers(t, c["turbidity_NTU"])
	product := 0.0
	for i := range xs {
		product += math.Log(xs[i]) / float64(len(xs))
		xs[i] = math.Log(xs[i])
	}
	centre, sigma := movingRanges(xs)
	// In the unit the centre is the geometric mean, and the lines lie a factor apart.
	if o := got.Location.Original; math.Abs(o.GetCentre()/math.Exp(product)-1) > 1e-4 || math.Abs(o.GetUpperAction()/(math.Exp(product)*math.Exp(3*sigma))-1) > 4e-4 {
		t.Errorf("in the unit: got centre %v and line %v", o.GetCentre(), o.GetUpperAction())
	}
	return flat(location, xs, centre, centre-3*sigma, centre+3*sigma)
}

func wantRootUpper(t *testing.T, c map[string][]string, _ *pb.ComputeLimitsResponse) wanted {
	xs := numbers(t, c["turbidity_NTU"])
	for i := range xs {
		xs[i] = math.Sqrt(xs[i])
	}
	centre, sigma := movingRanges(xs)
	return flat(location, xs, centre, math.NaN(), centre+3*sigma)
}

func wantLevels(t *testing.T, c map[string][]string, _ *pb.ComputeLimitsResponse) wanted {
	xs := numbers(t, c["lead_ug_per_L"])
	for i := range xs {
		for _, l := range leadLevels {
			if l.material == c["material"][i] {
				xs[i] = (xs[i] - l.reference) / l.sigma
				break
			}
		}
	}
	centre, sigma := movingRanges(xs)
	return flat(location, xs, centre, centre-3*sigma, centre+3*sigma)
}
