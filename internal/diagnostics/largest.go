package diagnostics

import (
	"math"
	"slices"
)

// sameFreedom counts sets with the same degrees of freedom; weight is what their squares may come to.
type sameFreedom struct {
	sets, shape, weight float64
}

// largestBelow gives the probability that no sum of squares x_i of a stratum exceeds bound·w_i, where their pooled
// variance is 1 and w_i is onceIn(n, ν_i), for x_i of χ² with ν_i degrees of freedom.
//
// The shares x_i/Σx are independent of the sum, so the probability is the same given any sum s, or under any rate θ of
// the gamma laws with shapes a_i = ν_i/2:
//
//	Π ∫₀^w_i x^(a_i-1)·e^(-θx)/Γ(a_i) dx · f(s)·Γ(A)·e^(θs)/s^(A-1), s = Σν_i/bound, A = Σa_i,
//
// with f the density of the sum of independent values cut at w_i. With θ such that this sum has the mean s, f(s) is taken
// from the normal density with the next terms of Edgeworth's series: a saddlepoint approximation, with an error of order
// 1/n² (Daniels 1954, from memory).
func largestBelow(bound, n float64, sets []set) float64 {
	groups, total := groupsOfFreedom(n, sets)
	unit := groups[len(groups)-1].weight // the largest, so that θ is of one order
	sum, most := total*2/bound/unit, 0.0
	for i := range groups {
		groups[i].weight /= unit
		most += groups[i].sets * groups[i].weight
	}
	if sum >= most {
		return 0
	}
	const reach = 300.
	low, high := -reach, reach // the mean of the cut sum falls as θ grows
	for range 60 {
		theta := low + (high-low)/2
		if mean, _, _, _, _ := cutSum(groups, theta); mean > sum {
			low = theta
		} else {
			high = theta
		}
	}
	theta := low + (high-low)/2
	if theta > reach-1 {
		return 1 // one set holds nearly all
	}
	if theta < 1-reach {
		return 0
	}
	_, k2, k3, k4, log := cutSum(groups, theta)
	all, _ := math.Lgamma(total)
	log += theta*sum + all - (total-1)*math.Log(sum) - math.Log(2*math.Pi*k2)/2
	correction := 1 + k4/(8*k2*k2) - 5*k3*k3/(24*k2*k2*k2)
	return max(0, min(1, math.Exp(log)*correction))
}

// groupsOfFreedom counts sets by their degrees of freedom, ascending, and adds up their shapes.
func groupsOfFreedom(n float64, sets []set) (groups []sameFreedom, total float64) {
	counts := map[int]float64{}
	var order []int
	for _, s := range sets {
		if counts[s.freedom] == 0 {
			order = append(order, s.freedom)
		}
		counts[s.freedom]++
	}
	slices.Sort(order)
	for _, freedom := range order {
		g := sameFreedom{counts[freedom], float64(freedom) / 2, onceIn(n, freedom)}
		groups = append(groups, g)
		total += g.sets * g.shape
	}
	return groups, total
}

// cutSum gives the mean and the next three cumulants of the sum of values with densities in proportion to
// x^(a-1)·e^(-θx) on (0, w), and the logarithm of Π ∫₀^w x^(a-1)·e^(-θx)/Γ(a) dx.
func cutSum(groups []sameFreedom, theta float64) (mean, k2, k3, k4, log float64) {
	for _, g := range groups {
		var moment [5]float64
		for j := range moment {
			moment[j] = cutGamma(g.shape+float64(j), theta*g.weight)
		}
		m1, m2, m3, m4 := moment[1]/moment[0], moment[2]/moment[0], moment[3]/moment[0], moment[4]/moment[0]
		variance := m2 - m1*m1
		third := m3 - 3*m1*m2 + 2*m1*m1*m1
		fourth := m4 - 4*m1*m3 - 3*m2*m2 + 12*m1*m1*m2 - 6*m1*m1*m1*m1
		w := g.weight
		mean += g.sets * w * m1
		k2 += g.sets * w * w * variance
		k3 += g.sets * w * w * w * third
		k4 += g.sets * w * w * w * w * fourth
		shape, _ := math.Lgamma(g.shape)
		scale := 0.0
		if theta < 0 {
			scale = -theta * w // see cutGamma
		}
		log += g.sets * (g.shape*math.Log(w) + math.Log(moment[0]) + scale - shape)
	}
	return mean, k2, k3, k4, log
}

// cutGamma gives ∫₀¹ y^(a-1)·e^(-θy) dy, for negative θ times e^θ, by series of positive terms (Kummer, from memory):
// e^(-θ)·Σ θ^k/(a(a+1)...(a+k)), and Σ |θ|^k/(k!·(a+k)).
func cutGamma(a, theta float64) float64 {
	size := math.Abs(theta)
	total, term := 0.0, 1.0
	if theta >= 0 {
		term = 1 / a
	}
	for k := 0.0; ; k++ {
		added := term
		if theta < 0 {
			added = term / (a + k)
			term *= size / (k + 1)
		} else {
			term *= size / (a + k + 1)
		}
		total += added
		if k > size && added <= 1e-17*total {
			return math.Exp(-size) * total
		}
	}
}
