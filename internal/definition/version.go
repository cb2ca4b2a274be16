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
	Location     *Trace  `json:"location"`
	Dispersion   *Trace  `json:"dispersion"`

	Groups         int        `json:"n"`
	Readings       int        `json:"readings"`
	CentreGiven    bool       `json:"centre_given"`
	SigmaGiven     bool       `json:"sigma_given"`
	Estimator      string     `json:"estimator"`
	Provisional    bool       `json:"provisional"`
	Estimates      []Estimate `json:"estimates"`
	Intervals      []Interval `json:"intervals"`
	Findings       []Finding  `json:"findings"`
	Basis          string     `json:"basis"`
	Excluded       []Excluded `json:"excluded"`
	ExcludedPoints []Excluded `json:"excluded_points"`

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
