package definition

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"reflect"
	"time"

	"limitary/internal/chart"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

// schemaNumber numbers the form of Content's canonical bytes.
const schemaNumber = 1

// VersionState is what has been decided on a version.
type VersionState string

const (
	Proposed  VersionState = "PROPOSED"
	Approved  VersionState = "APPROVED"
	Rejected  VersionState = "REJECTED"
	Withdrawn VersionState = "WITHDRAWN"
)

// Content is a version as proposed: everything the approver reads and the judge uses. It never changes; its canonical
// bytes are stored and its digest is checked on every read. Field names of the JSON form never change.
type Content struct {
	Schema int    `json:"schema"`
	Chart  string `json:"chart"`
	Number int    `json:"number"`
	// Lot limits the version to one track; empty is every track.
	Lot          string     `json:"lot"`
	Kind         chart.Kind `json:"kind"`
	SubgroupSize int        `json:"subgroup_size"`
	Unit         string     `json:"unit"`
	// Decimals is the number of published decimals.
	Decimals     int     `json:"published_decimals"`
	ProcessSigma float64 `json:"process_sigma"`
	// Model is what scales follow from besides; nil adds nothing.
	Model      *chart.Model `json:"model,omitempty"`
	Location   *Trace       `json:"location"`
	Dispersion *Trace       `json:"dispersion"`

	Groups      int        `json:"n"`
	Readings    int        `json:"readings"`
	CentreGiven bool       `json:"centre_given"`
	SigmaGiven  bool       `json:"sigma_given"`
	Estimator   string     `json:"estimator"`
	Provisional bool       `json:"provisional"`
	Estimates   []Estimate `json:"estimates"`
	Intervals   []Interval `json:"intervals"`
	Findings    []Finding  `json:"findings"`
	Basis       string     `json:"basis"`
	// BasisFrom and BasisTo bound the measuring times of a basis of stored results.
	BasisFrom      *time.Time `json:"basis_from,omitempty"`
	BasisTo        *time.Time `json:"basis_to,omitempty"`
	Excluded       []Excluded `json:"excluded"`
	ExcludedPoints []Excluded `json:"excluded_points"`
	// Components, Tails, FalseAlarm and Target are what the computation found where the kind or the basis has them.
	Components []Component `json:"components,omitempty"`
	Tails      []Tail      `json:"tails,omitempty"`
	Parts      []Part      `json:"parts,omitempty"`
	FalseAlarm *FalseAlarm `json:"false_alarm,omitempty"`
	Compared   *Compared   `json:"compared,omitempty"`
	// ChangeTest sets the results that are new to it against the version in force.
	ChangeTest *ChangeTest `json:"change_test,omitempty"`

	Author        string       `json:"author"`
	ProposedAt    time.Time    `json:"proposed_at"`
	Reason        string       `json:"reason"`
	EffectiveFrom time.Time    `json:"effective_from"`
	Instructions  Instructions `json:"instructions"`
	Judge         int          `json:"judge"`
}

// Trace is one trace of a version: published lines and the rules that watch them.
type Trace struct {
	chart.Trace
	// RuleSet is the published set the rules were taken from, if any.
	RuleSet string       `json:"rule_set"`
	Rules   []rules.Spec `json:"rules"`
}

// Estimate is one estimate of process sigma.
type Estimate struct {
	Name             string  `json:"name"`
	Sigma            float64 `json:"sigma"`
	DegreesOfFreedom float64 `json:"degrees_of_freedom"`
	N                int     `json:"n"`
	Chosen           bool    `json:"chosen"`
}

// Interval is a two-sided confidence interval.
type Interval struct {
	Name  string  `json:"name"`
	Lower float64 `json:"lower"`
	Upper float64 `json:"upper"`
	Level float64 `json:"level"`
}

// Finding is something the data say about the limits.
type Finding struct {
	Code      string  `json:"code"`
	Figure    float64 `json:"figure"`
	Threshold float64 `json:"threshold"`
	Text      string  `json:"text"`
	Advice    string  `json:"advice"`
	CouldMiss string  `json:"could_miss"`
}

// Component is one part of the variance of a reading.
type Component struct {
	Name             string  `json:"name"`
	Sigma            float64 `json:"sigma"`
	DegreesOfFreedom float64 `json:"degrees_of_freedom"`
	// Lower and Upper bound a 95 % interval; nil where the data leave an end open.
	Lower     *float64 `json:"lower"`
	Upper     *float64 `json:"upper"`
	Truncated bool     `json:"truncated,omitempty"`
}

// Part is one part of how sigma depends on the mean of duplicates.
type Part struct {
	Name             string    `json:"name"`
	From             float64   `json:"from"`
	Groups           int       `json:"groups"`
	Sigma            float64   `json:"sigma"`
	Given            bool      `json:"given"`
	DegreesOfFreedom float64   `json:"degrees_of_freedom"`
	Interval         *Interval `json:"interval"`
}

// Tail is the probability that a process as estimated leaves beyond a line.
type Tail struct {
	Trace       string  `json:"trace"`
	Line        string  `json:"line"`
	Size        float64 `json:"size"`
	Probability float64 `json:"probability"`
	Nominal     float64 `json:"nominal"`
}

// FalseAlarm is the rate of points beyond the action lines of the location trace that limits from such a basis have:
// the nominal one, and the median and the 10 % and 90 % points over bases.
type FalseAlarm struct {
	Nominal float64 `json:"nominal"`
	Median  float64 `json:"median"`
	P10     float64 `json:"p10"`
	P90     float64 `json:"p90"`
}

// Compared sets given figures against the data: bias is mean less given centre, the ratios are sigmas estimated over
// given, that of readings and that between runs.
type Compared struct {
	Bias    *Estimated `json:"bias,omitempty"`
	Ratio   *Estimated `json:"ratio,omitempty"`
	Between *Estimated `json:"between_ratio,omitempty"`
}

// Estimated is a figure with its 95 % interval; an end is nil where the data leave it open.
type Estimated struct {
	Estimate float64  `json:"estimate"`
	Lower    *float64 `json:"lower"`
	Upper    *float64 `json:"upper"`
}

// ChangeTest is the answer to whether the limits in force should be kept, as package changetest explains it.
type ChangeTest struct {
	// Against is the version in force that was compared with, 0 where figures were sent.
	Against            int           `json:"against"`
	Results            int           `json:"results"`
	Excluded           int           `json:"excluded"`
	InOldBasis         int           `json:"in_old_basis"`
	Centre             ChangeFigure  `json:"centre,omitzero"`
	Spread             ChangeFigure  `json:"spread,omitzero"`
	Means              *ChangeFigure `json:"means,omitempty"`
	Decision           string        `json:"decision"`
	Looks              int           `json:"looks"`
	OneWrongMax        float64       `json:"one_wrong_max"`
	Lag1               float64       `json:"lag1"`
	EffectiveForCentre float64       `json:"effective_for_centre"`
	EffectiveForSpread float64       `json:"effective_for_spread"`
	Text               string        `json:"text"`
	Notes              []string      `json:"notes,omitempty"`
}

// ChangeFigure is the answer on one figure; a difference in sigmas in force, or a ratio to the sigma in force.
type ChangeFigure struct {
	Estimate          *float64 `json:"estimate"`
	Lower             *float64 `json:"lower"`
	Upper             *float64 `json:"upper"`
	RelevantLower     float64  `json:"relevant_lower"`
	RelevantUpper     float64  `json:"relevant_upper"`
	Decision          string   `json:"decision"`
	Reason            string   `json:"reason"`
	Differs           bool     `json:"differs"`
	Needed            *int     `json:"needed"`
	PublishedDecision string   `json:"published_decision"`
	P                 *float64 `json:"p"`
	PValid            bool     `json:"p_valid"`
	PReason           string   `json:"p_reason"`
	PlainP            *float64 `json:"plain_p"`
	Text              string   `json:"text"`
}

// Excluded is a result, or a point of data sent along, left out of the estimate.
type Excluded struct {
	Source   string `json:"source,omitempty"`
	SourceID string `json:"source_id,omitempty"`
	Point    int    `json:"point,omitempty"`
	Reason   string `json:"reason"`
}

// Instructions are what the laboratory does, in its own words, on each consequence.
type Instructions struct {
	Look string `json:"look"`
	Act  string `json:"act"`
	Stop string `json:"stop"`
}

// For gives the instruction of a standing; empty where there is none.
func (i Instructions) For(s judge.Standing) string {
	switch s {
	case judge.LookAt:
		return i.Look
	case judge.ActOn:
		return i.Act
	case judge.StopAt:
		return i.Stop
	}
	return ""
}

// Version is a content with what was decided on it.
type Version struct {
	Content
	// Digest is SHA-256 over the canonical bytes, in hexadecimal.
	Digest string
	State  VersionState
	// DecidedBy approved or rejected it; WithdrawnBy withdrew it later.
	DecidedBy, DecisionReason    string
	DecidedAt                    time.Time
	WithdrawnBy, WithdrawnReason string
	WithdrawnAt                  time.Time
}

// Canonical gives the bytes a version is stored and digested as.
func (c Content) Canonical() []byte {
	c.Schema = schemaNumber
	b, err := json.Marshal(c)
	if err != nil {
		panic(fmt.Sprintf("definition: version with a number that cannot be written: %v", err))
	}
	return b
}

// DigestOf gives the digest of canonical bytes.
func DigestOf(canonical []byte) string {
	sum := sha256.Sum256(canonical)
	return hex.EncodeToString(sum[:])
}

// ParseContent reads canonical bytes back and checks them against their digest.
func ParseContent(canonical []byte, digest string) (Content, error) {
	var c Content
	if got := DigestOf(canonical); got != digest {
		return c, fmt.Errorf("definition: a stored version does not have its digest: stored %s, computed %s", digest, got)
	}
	d := json.NewDecoder(bytes.NewReader(canonical))
	d.DisallowUnknownFields()
	if err := d.Decode(&c); err != nil {
		return c, fmt.Errorf("definition: stored version: %w", err)
	}
	if c.Schema != schemaNumber {
		return c, fmt.Errorf("definition: stored version has schema %d, this build knows %d", c.Schema, schemaNumber)
	}
	return c, nil
}

// JudgeLimits gives the part of the content the judge works by.
func (c Content) JudgeLimits() judge.Limits {
	l := judge.Limits{Kind: c.Kind, SubgroupSize: c.SubgroupSize, Places: c.Decimals, ProcessSigma: c.ProcessSigma}
	if c.Model != nil {
		l.Model = *c.Model
	}
	for role, t := range map[chart.Role]*Trace{chart.Location: c.Location, chart.Dispersion: c.Dispersion} {
		if t != nil {
			l.Traces[role] = &judge.Trace{Trace: t.Trace, Rules: t.Rules}
		}
	}
	return l
}

// SameNumbers reports whether two versions judge alike, so that the later one continues the earlier one's segment:
// equal centre, sigma, lines, decimals and rules.
func (c Content) SameNumbers(other Content) bool {
	return c.Judge == other.Judge && reflect.DeepEqual(c.JudgeLimits(), other.JudgeLimits())
}
