package changetest

import "limitary/internal/limits"

const (
	// CentreRelevanceDefault is the difference of centres, in sigmas of the plotted statistic, and SpreadRelevanceDefault
	// the ratio of sigmas, up to which a difference does not matter. Our choice, no source.
	CentreRelevanceDefault = 0.5
	SpreadRelevanceDefault = 1.25
	// CentreRelevanceMax and SpreadRelevanceMax bound what a laboratory may set: beyond five sigmas, or a ratio of ten,
	// every result of the new process lies outside the old lines or none ever does. Our choice, no source.
	CentreRelevanceMax = 5.0
	SpreadRelevanceMax = 10.0
	// LooksMax bounds the looks of twelve months: more than one an hour is a slip of the pen.
	LooksMax = 10_000
	// BasisMax bounds the counts and the degrees of freedom of the old side.
	BasisMax = 1e9
)

// Group is a result, and whether it was in the basis of the limits in force. Such a group cannot speak for the new side.
type Group struct {
	limits.Group
	InOldBasis bool
}

// Relevance says what differences matter to the laboratory; zero stands for the default.
type Relevance struct {
	// CentreSigmas is a difference in sigmas of the plotted statistic, up to CentreRelevanceMax.
	CentreSigmas float64
	// SigmaRatio is a ratio above 1, up to SpreadRelevanceMax; its inverse is the limit below.
	SigmaRatio float64
}

// Trigger says why the comparison was made.
type Trigger uint8

const (
	// Planned comparisons were due whatever the results looked like.
	Planned Trigger = iota
	// AfterSignal comparisons were made because the chart had signalled.
	AfterSignal
)

// String names the trigger in messages and files.
func (t Trigger) String() string {
	switch t {
	case Planned:
		return "planned"
	case AfterSignal:
		return "after_signal"
	}
	return "unknown"
}

// Request is what a comparison is made from.
type Request struct {
	InForce InForce
	// Groups in the order of the track. It may be empty; then the answer says how many results are needed.
	Groups    []Group
	Relevance Relevance
	Trigger   Trigger
	// Looks counts the comparisons of the last twelve months, this one included: 1 to LooksMax.
	Looks int
}

// check refuses what is wrong apart from the groups, and fills in the defaults.
func (r *Request) check() error {
	if err := r.InForce.check(); err != nil {
		return err
	}
	if r.Relevance.CentreSigmas == 0 {
		r.Relevance.CentreSigmas = CentreRelevanceDefault
	}
	if r.Relevance.SigmaRatio == 0 {
		r.Relevance.SigmaRatio = SpreadRelevanceDefault
	}
	if d := r.Relevance.CentreSigmas; !(d > 0 && d <= CentreRelevanceMax) {
		return refuse("relevance.centreSigmas", d, "want more than 0 and at most %g sigmas", CentreRelevanceMax)
	}
	if q := r.Relevance.SigmaRatio; !(q > 1 && q <= SpreadRelevanceMax) {
		return refuse("relevance.sigmaRatio", q, "want more than 1 and at most %g", SpreadRelevanceMax)
	}
	if r.Trigger > AfterSignal {
		return refuse("trigger", uint8(r.Trigger), "want %s or %s", Planned, AfterSignal)
	}
	if r.Looks < 1 || r.Looks > LooksMax {
		return refuse("looks", r.Looks, "want 1 to %d looks in twelve months, this one included", LooksMax)
	}
	return nil
}
