package diagnostics

import "math"

// criticalPoint is a critical value for samples of n.
type criticalPoint struct {
	n        int
	critical float64
}

// rangePoints are the hundredth of the ratio of range to standard deviation in normal samples: up to n = 1000 by
// simulation of 40,000 to 200,000 samples (see TestCriticalValues, which makes them anew), beyond that, where the
// standard deviation hardly varies, that of the range itself from its distribution, integrated, and rounded down to
// meet the smaller.
var rangePoints = []criticalPoint{
	{20, 2.992}, {25, 3.143}, {30, 3.273}, {40, 3.467}, {50, 3.618}, {75, 3.894}, {100, 4.087}, {150, 4.362}, {200, 4.551},
	{300, 4.815}, {500, 5.149}, {1000, 5.577}, {2000, 5.98}, {5000, 6.50}, {10000, 6.88}, {20000, 7.25}, {50000, 7.70}, {100000, 8.04},
}

// rangeCritical gives the ratio that one normal sample of n in a hundred falls short of.
func rangeCritical(n int) float64 { return interpolated(rangePoints, n, math.Log) }

// setupPoints and setupLoosePoints are the numbers of flagged points that at most one basis of n independent normal
// values in a hundred exceeds: the first with sigma from the mean moving range, from 20,000 simulated bases each up to
// n = 500 and 1500 of the longest; the second with sigma from the median moving range, which varies most. It serves
// all other ways too, such as means of subgroups and given limits (see TestSizeOnCleanData).
var (
	setupPoints = []criticalPoint{
		{10, 2}, {15, 2}, {20, 3}, {25, 4}, {30, 5}, {50, 7}, {75, 9}, {100, 10}, {200, 16}, {500, 28}, {1000, 45}, {3000, 103}, {10000, 296},
	}
	setupLoosePoints = []criticalPoint{
		{10, 4}, {15, 4}, {20, 5}, {25, 6}, {30, 7}, {50, 8}, {75, 10}, {100, 12}, {200, 17}, {500, 29}, {1000, 46}, {3000, 105}, {10000, 298},
	}
)

const (
	// setupRate is the share of points that the rules flag in the long run, rounded up: 0.0232 by package runlength.
	setupRate = 0.0233
	// setupRoot is 2.33 times the standard deviation of their number over √n, 0.62 in the longest simulated bases,
	// rounded up.
	setupRoot = 0.7
)

// setupCritical gives the number of flagged points that at most one clean basis of n in a hundred exceeds. It is
// interpolated in √n and rounded up.
func setupCritical(points []criticalPoint, n int) int {
	if last := points[len(points)-1]; n > last.n {
		return int(math.Ceil(setupRate*float64(n) + setupRoot*math.Sqrt(float64(n))))
	}
	return int(math.Ceil(interpolated(points, n, math.Sqrt)))
}

// interpolated reads a table linearly in scale(n); beyond its ends it stays at the last value.
func interpolated(points []criticalPoint, n int, scale func(float64) float64) float64 {
	last := points[0]
	for _, p := range points {
		if n > p.n {
			last = p
			continue
		}
		if p.n == last.n {
			return p.critical
		}
		along := (scale(float64(n)) - scale(float64(last.n))) / (scale(float64(p.n)) - scale(float64(last.n)))
		return last.critical + along*(p.critical-last.critical)
	}
	return last.critical
}

// normalQuantile99 is exceeded by a standard normal value with probability 0.01.
const normalQuantile99 = 2.3263478740

// splitSD is the standard deviation of √n·ln(1 - share) in large samples, see splitCritical.
var splitSD = math.Sqrt(8/math.Pi*(1-3/math.Pi)) / (1 - 2/math.Pi)

// splitCritical gives the share that the best split of n independent normal values exceeds in one sample of a hundred.
// In large samples that split is at the mean, the share is the square of Geary's ratio of mean deviation to standard
// deviation, and -ln(1-share) is normal with mean ln(π/(π-2)) and variance (8/π)(1-3/π)/(1-2/π)²/n. What is added for
// smaller n is fitted to 200,000 simulated samples of each of twelve sizes from 10 to 200 (see TestCriticalValues).
func splitCritical(n int) float64 {
	size := float64(n)
	scaled := normalQuantile99*splitSD + (4.45+25/size)/math.Sqrt(size)
	return 1 - (1-2/math.Pi)*math.Exp(-scaled/math.Sqrt(size))
}
