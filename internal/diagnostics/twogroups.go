package diagnostics

import "fmt"

// CodeTwoGroups is the code of values that fall into two groups.
const CodeTwoGroups = "TWO_GROUPS"

// twoGroupsMin is the least number of values that are split.
const twoGroupsMin = 10

// twoGroups asks how much of the variation goes away when the values are split in two where that is most: the test for
// two normal clusters of L. Engelman and J. A. Hartigan, Journal of the American Statistical Association 64 (1969)
// 1647-1648 (from memory), with critical values of our own.
func (s *sample) twoGroups() Test {
	t := Test{
		Code: CodeTwoGroups, Name: "share of variation explained by the best split in two", Subject: s.subject, N: s.n, Level: Level,
		CouldMiss: "Two groups less than about three of their sigmas apart, or one with less than a tenth of the values. A flat or cut-off distribution also splits well.",
	}
	t, ok := s.ready(t, twoGroupsMin)
	if !ok {
		return t
	}
	z, reason := s.apart()
	t.Reason = reason
	share, at := bestSplit(z)
	critical := splitCritical(s.n)
	t = t.withCritical(share, critical, share > critical)
	below := 0
	for _, x := range z {
		if x < at {
			below++
		}
	}
	t.text = fmt.Sprintf("The %s fall into two groups, %d and %d of them: the split explains %.0f %% of their variation, more than the %.0f %% that one normal group would allow.",
		s.subject, below, s.n-below, 100*share, 100*critical)
	t.advice = "Look for two instruments, analysts, lots, columns or positions behind the groups. Limits over both are too wide for each; bring them together or chart them apart."
	return t
}

// bestSplit gives the largest share of the sum of squares about the mean that a split of sorted values into low and high
// explains, and the lowest value of the high group. Each group has at least a tenth of the values and at least two, so
// that outliers are no group.
func bestSplit(sorted []float64) (share, at float64) {
	n := len(sorted)
	least := max(2, (n+9)/10)
	squares, low, mean := 0.0, 0.0, sum(sorted)/float64(n)
	for _, z := range sorted {
		squares += (z - mean) * (z - mean)
	}
	for i, z := range sorted[:n-least] {
		low += z - mean
		k := i + 1
		if k < least || sorted[k] == z {
			continue
		}
		// Both groups' sums are ±low, so the sum of squares between them is low²(1/k + 1/(n-k)).
		between := low * low * (1/float64(k) + 1/float64(n-k))
		if between > share*squares {
			share, at = between/squares, sorted[k]
		}
	}
	return min(share, 1), at
}
