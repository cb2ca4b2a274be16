package counts

import "math"

const (
	// SizeMax bounds the size of a sample and what was inspected for one: far beyond any plate, and still a millisecond a line.
	SizeMax = 1e9
	// MeanMax bounds the mean of a Poisson law for the same reason.
	MeanMax = 1e9
)

// Law is the distribution of a count. The zero value is a Poisson law of mean 0. Laws compare with ==.
type Law struct {
	size       float64 // of a binomial law; 0 says Poisson
	p, q, mean float64 // q = 1-p; each within one rounding, the smaller exact
}

// Binomial is the law of nonconforming items among size items that each fail with probability p: size whole, from 1 to
// SizeMax; p from 0 to 1.
func Binomial(size, p float64) (Law, error) {
	if err := checkWhole("size", size, 1, SizeMax); err != nil {
		return Law{}, err
	}
	if err := checkRange("p", p, 0, 1); err != nil {
		return Law{}, err
	}
	return binomial(size, p), nil
}

func binomial(size, p float64) Law {
	return Law{size: size, p: p, q: 1 - p, mean: size * p}
}

// Poisson is the law of nonconformities that are expected mean times, from 0 to MeanMax: for a u chart the rate times
// what was inspected.
func Poisson(mean float64) (Law, error) {
	if err := checkRange("mean", mean, 0, MeanMax); err != nil {
		return Law{}, err
	}
	return poisson(mean), nil
}

func poisson(mean float64) Law { return Law{q: 1, mean: mean} }

// Mean is size·p, or the mean of the Poisson law.
func (l Law) Mean() float64 { return l.mean }

// Sigma is the standard deviation: √(size·p·(1-p)), or √mean.
func (l Law) Sigma() float64 {
	if l.size > 0 {
		return math.Sqrt(l.mean * l.q)
	}
	return math.Sqrt(l.mean)
}

// most is the greatest count that can occur.
func (l Law) most() float64 {
	if l.size > 0 {
		return l.size
	}
	return math.Inf(1)
}

// reflected is the law of size-X of a binomial law.
func (l Law) reflected() Law {
	return Law{size: l.size, p: l.q, q: l.p, mean: l.size * l.q}
}

// up is P(X=k+1)/P(X=k).
func (l Law) up(k float64) float64 {
	if l.size > 0 {
		return (l.size - k) * l.p / ((k + 1) * l.q)
	}
	return l.mean / (k + 1)
}

// down is P(X=k-1)/P(X=k).
func (l Law) down(k float64) float64 {
	if l.size > 0 {
		return k * l.q / ((l.size - k + 1) * l.p)
	}
	return k / l.mean
}

// probability is P(X=k) for a whole k from 0 to most. It is written as the saddle-point approximation with its exact
// correction (Loader 2000, Fast and Accurate Computation of Binomial Probabilities; from memory): the exponent holds
// only small quantities, so nothing cancels and rounding of size·p does no harm, at any size.
func (l Law) probability(k float64) float64 {
	switch {
	case l.size == 0 && k == 0:
		return math.Exp(-l.mean)
	case l.mean == 0 || l.q == 0: // All counts are 0, or all are size.
		if k == l.mean {
			return 1
		}
		return 0
	case l.size == 0:
		return math.Exp(-stirlingError(k)-deviance(k, l.mean)) / math.Sqrt(2*math.Pi*k)
	case k == 0:
		return math.Exp(l.size * logComplement(l.q, l.p))
	case k == l.size:
		return math.Exp(l.size * logComplement(l.p, l.q))
	}
	rest := l.size - k
	exponent := stirlingError(l.size) - stirlingError(k) - stirlingError(rest) -
		deviance(k, l.mean) - deviance(rest, l.size*l.q)
	return math.Exp(exponent) * math.Sqrt(l.size/(2*math.Pi*k*rest))
}

// logComplement is log p where q = 1-p, from the smaller of the two, which is exact.
func logComplement(p, q float64) float64 {
	if q < p {
		return math.Log1p(-q)
	}
	return math.Log(p)
}
