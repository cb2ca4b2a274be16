package integral

import (
	"math"
	"slices"

	"limitary/internal/runlength/data"
	"limitary/internal/runlength/forward"
)

// Walk is a statistic y that becomes Keep·y + Weight·z + Drift at the point z, held at 0 from below where Floor is set,
// and signals where it leaves Lower to Upper.
type Walk struct {
	Keep, Weight, Drift float64
	Floor               bool
	Lower, Upper        float64
}

// grid is the nodes at which a function of the statistic is held. With a floor node 0 is the atom at 0.
type grid struct {
	walk  Walk
	order int
	edges []float64
	nodes []float64
	atom  int // 1 with a floor
	// barycentric weights of the nodes of one panel, and the values of its Lagrange polynomials at the quadrature points.
	places, bary       []float64
	points, weights    []float64
	whole              []float64
	scratch, densities []float64
}

// quadratureExtra is by how many points the quadrature on a panel exceeds its nodes.
const quadratureExtra = 8

// newGrid lays panels of at most width over the interval, ending also at the breaks.
func newGrid(w Walk, order int, width float64, breaks []float64) *grid {
	g := &grid{walk: w, order: order}
	if w.Floor {
		g.atom = 1
	}
	cuts := []float64{w.Lower, w.Upper}
	least := (w.Upper - w.Lower) * 1e-6
	for _, b := range breaks {
		if b > w.Lower+least && b < w.Upper-least {
			cuts = append(cuts, b)
		}
	}
	slices.Sort(cuts)
	for i := 1; i < len(cuts); i++ {
		n := max(1, int(math.Ceil((cuts[i]-cuts[i-1])/width)))
		for j := range n {
			g.edges = append(g.edges, cuts[i-1]+(cuts[i]-cuts[i-1])*float64(j)/float64(n))
		}
	}
	g.edges = append(g.edges, w.Upper)
	g.places, _ = forward.Nodes(order)
	g.points, g.weights = forward.Nodes(order + quadratureExtra)
	g.bary = barycentric(g.places)
	g.whole = make([]float64, len(g.points)*order)
	for i, t := range g.points {
		g.lagrange(t, g.whole[i*order:(i+1)*order])
	}
	g.scratch, g.densities = make([]float64, order), make([]float64, len(g.points))
	if w.Floor {
		g.nodes = append(g.nodes, 0)
	}
	for i := 1; i < len(g.edges); i++ {
		mid, half := (g.edges[i]+g.edges[i-1])/2, (g.edges[i]-g.edges[i-1])/2
		for _, t := range g.places {
			g.nodes = append(g.nodes, mid+half*t)
		}
	}
	return g
}

func barycentric(nodes []float64) []float64 {
	w := make([]float64, len(nodes))
	for i, x := range nodes {
		w[i] = 1
		for j, y := range nodes {
			if i != j {
				w[i] /= 2 * (x - y) // the factor keeps the products near 1
			}
		}
	}
	return w
}

// lagrange fills into with the Lagrange polynomials of one panel's nodes at t.
func (g *grid) lagrange(t float64, into []float64) {
	sum := 0.0
	for j, node := range g.places {
		d := t - node
		if d == 0 {
			clear(into)
			into[j] = 1
			return
		}
		into[j] = g.bary[j] / d
		sum += into[j]
	}
	for j := range into {
		into[j] /= sum
	}
}

// row fills weights with those of the nodes in the value at y after one point, and gives the probability of a signal.
func (g *grid) row(from Walk, y float64, d data.Distribution, weights []float64) (signal float64) {
	clear(weights)
	start := from.Keep*y + from.Drift
	at := func(v float64) float64 { return (v - start) / from.Weight } // the point that leads to v
	zlo, zhi := d.Support()
	lo, hi := max(g.walk.Lower, start+from.Weight*zlo), min(g.walk.Upper, start+from.Weight*zhi)
	signal = d.Between(at(g.walk.Upper), math.Inf(1))
	if g.walk.Floor {
		weights[0] = d.Between(math.Inf(-1), at(0))
	} else {
		signal += d.Between(math.Inf(-1), at(g.walk.Lower))
	}
	for i := 1; i < len(g.edges); i++ {
		a, b := g.edges[i-1], g.edges[i]
		if b <= lo || a >= hi {
			continue
		}
		into := weights[g.atom+(i-1)*g.order:][:g.order]
		g.panel(a, b, max(a, lo), min(b, hi), func(v float64) float64 { return d.Density(at(v)) / from.Weight }, into)
	}
	return signal
}

// panel adds the integrals over lo to hi of density times the Lagrange polynomials of the panel a to b.
func (g *grid) panel(a, b, lo, hi float64, density func(float64) float64, into []float64) {
	mid, half := (lo+hi)/2, (hi-lo)/2
	for i, t := range g.points {
		v := mid + half*t
		w := half * g.weights[i] * density(v)
		basis := g.whole[i*g.order : (i+1)*g.order]
		if lo != a || hi != b {
			basis = g.scratch
			g.lagrange((2*v-a-b)/(b-a), basis)
		}
		for j, l := range basis {
			into[j] += w * l
		}
	}
}

// breaks gives the places at which the value has a kink because the points end sharply at one or both ends of their
// support: where a step to such an end just reaches the border or the floor, and where it reaches a place with a kink.
// Later gives the walk of the g-th point from now; borders may move.
func breaks(d data.Distribution, deviation float64, later func(g int) Walk) (list []float64) {
	const generations, sharp, near = 4, 1e-11, 0.05
	var ends []float64
	zlo, zhi := d.Support()
	if d.Density(zlo+near*deviation)*deviation > sharp {
		ends = append(ends, zlo)
	}
	if d.Density(zhi-near*deviation)*deviation > sharp {
		ends = append(ends, zhi)
	}
	for g := 1; g <= generations && len(ends) > 0; g++ {
		w := later(g)
		places := []float64{w.Lower, w.Upper}
		for range g {
			var next []float64
			for _, v := range places {
				for _, z := range ends {
					if y := (v - w.Drift - w.Weight*z) / w.Keep; y > w.Lower && y < w.Upper {
						next = append(next, y)
					}
				}
			}
			places = next
		}
		list = append(list, places...)
	}
	slices.Sort(list)
	return slices.CompactFunc(list, func(a, b float64) bool { return math.Abs(a-b) < 1e-9 })
}
