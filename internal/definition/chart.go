// Package definition holds what Limitary keeps: charts, versions of limits, control results, principals and their
// keys. Its types are checked, immutable descriptions; a version's canonical bytes and digest are made here. It knows
// neither the database nor the wire.
package definition

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"limitary/internal/chart"
	"limitary/internal/decimal"
)

// Limits on what a chart can be. Each keeps one row of a list or one cell of a sheet readable.
const (
	TitleBytesMax      = 200
	UnitBytesMax       = 32
	LabelsMax          = 32
	LabelKeyBytesMax   = 64
	LabelValueBytesMax = 200
	TextBytesMax       = 4000
	NameBytesMax       = 200
	IntervalMax        = 366 * 24 * time.Hour
)

// What matters to a laboratory that has not said so: half a sigma, and a quarter of sigma more or less (our choice, no
// source).
const (
	RelevantShiftDefault, RelevantShiftMax = 0.5, 5.0
	RelevantRatioDefault, RelevantRatioMax = 1.25, 10.0
)

// Relevance gives what matters to the chart's laboratory, by default where it has not said so.
func (c Chart) Relevance() (shiftSigmas, sigmaRatio float64) {
	shiftSigmas, sigmaRatio = c.RelevantShiftSigmas, c.RelevantSigmaRatio
	if shiftSigmas == 0 {
		shiftSigmas = RelevantShiftDefault
	}
	if sigmaRatio == 0 {
		sigmaRatio = RelevantRatioDefault
	}
	return shiftSigmas, sigmaRatio
}

// Chart is what is watched.
type Chart struct {
	// Name is the slug, unique for good.
	Name         string
	Title        string
	Kind         chart.Kind
	SubgroupSize int
	Unit         string
	// Decimals of later versions; nil leaves the choice to the data.
	Decimals    *int
	Labels      map[string]string
	DisplayZone string
	// PlanInterval is how often a control is due, LongestGap what a moving range of an estimate may bridge; 0 is none.
	PlanInterval, LongestGap time.Duration
	RepeatRule               string
	LotsAreTracks            bool
	// Standardised charts plot (reading - reference)/sigma, with the reference and sigma that the version gives for the
	// material of the result.
	Standardised bool
	// RelevantShiftSigmas and RelevantSigmaRatio say from where on a difference from the limits in force matters to the
	// laboratory: of the centre, in sigmas, and of sigma, as a ratio either way. 0 takes the default.
	RelevantShiftSigmas, RelevantSigmaRatio float64

	// Given by the store.
	Revision  int64
	Archived  bool
	CreatedAt time.Time
}

var slugForm = regexp.MustCompile(`^[a-z0-9]([a-z0-9-]{0,62}[a-z0-9])?$`)

// CheckSlug reports whether s can name a chart.
func CheckSlug(field, s string) error {
	if !slugForm.MatchString(s) {
		return Invalid(field, "%q: want 1 to 64 characters of a-z, 0-9 and '-', starting and ending with a letter or digit", clip(s))
	}
	return nil
}

// Check reports the first thing wrong with the chart, as an *Error.
func (c Chart) Check() error {
	if err := CheckSlug("name", c.Name); err != nil {
		return err
	}
	if c.Kind == chart.Given {
		return Invalid("kind", "is not set; want one of %s", strings.ToUpper(chart.KindNames()))
	}
	if c.Standardised && (c.Kind.Counts() || c.Kind.Duplicates()) {
		return Invalid("standardised", "is set, but only charts of single readings and means are standardised, not those of kind %s", c.Kind)
	}
	if err := c.Kind.CheckSize(c.SubgroupSize); err != nil {
		return Invalid("subgroup_size", "%v", err)
	}
	if err := CheckText("unit", c.Unit, 1, UnitBytesMax); err != nil {
		return err
	}
	if c.LongestGap < 0 || c.LongestGap > IntervalMax {
		return Invalid("longest_gap", "%v: want 0 to %v", c.LongestGap, IntervalMax)
	}
	return c.CheckChangeable()
}

// CheckChangeable checks what UpdateChart can change.
func (c Chart) CheckChangeable() error {
	if err := CheckText("title", c.Title, 0, TitleBytesMax); err != nil {
		return err
	}
	if c.Decimals != nil && (*c.Decimals < 0 || *c.Decimals > decimal.PlacesMax) {
		return Invalid("decimals", "%d: want 0 to %d", *c.Decimals, decimal.PlacesMax)
	}
	if c.PlanInterval < 0 || c.PlanInterval > IntervalMax {
		return Invalid("plan_interval", "%v: want 0 to %v", c.PlanInterval, IntervalMax)
	}
	if _, err := time.LoadLocation(c.DisplayZone); err != nil || c.DisplayZone == "Local" {
		return Invalid("display_zone", "%q: no such time zone; write one as in the IANA list, such as Europe/London", clip(c.DisplayZone))
	}
	if s := c.RelevantShiftSigmas; s != 0 && !(s >= 0.01 && s <= RelevantShiftMax) {
		return Invalid("relevant_shift_sigmas", "%v: want 0.01 to %v, or nothing for %v", s, RelevantShiftMax, RelevantShiftDefault)
	}
	if r := c.RelevantSigmaRatio; r != 0 && !(r >= 1.01 && r <= RelevantRatioMax) {
		return Invalid("relevant_sigma_ratio", "%v: want 1.01 to %v, or nothing for %v", r, RelevantRatioMax, RelevantRatioDefault)
	}
	if err := CheckText("repeat_rule", c.RepeatRule, 0, TextBytesMax); err != nil {
		return err
	}
	return CheckLabels("labels", c.Labels)
}

// CheckLabels checks keys, values and number of labels.
func CheckLabels(field string, labels map[string]string) error {
	if len(labels) > LabelsMax {
		return &Error{Reason: TooManyItems, Field: field, Text: fmt.Sprintf("%d labels, the limit is %d", len(labels), LabelsMax)}
	}
	for k, v := range labels {
		if err := CheckName(field, k, 1, LabelKeyBytesMax); err != nil {
			return err
		}
		if err := CheckName(fmt.Sprintf("%s[%s]", field, k), v, 0, LabelValueBytesMax); err != nil {
			return err
		}
	}
	return nil
}

// CheckText checks length, encoding and characters of a text: no control characters but line feed and tab in long texts.
func CheckText(field, s string, bytesMin, bytesMax int) error {
	if len(s) < bytesMin {
		return Invalid(field, "is empty; want %d to %d bytes", bytesMin, bytesMax)
	}
	if len(s) > bytesMax {
		return Invalid(field, "%d bytes long, the limit is %d", len(s), bytesMax)
	}
	if !utf8.ValidString(s) {
		return Invalid(field, "is not valid UTF-8")
	}
	for _, r := range s {
		if unicode.IsControl(r) && !(bytesMax >= TextBytesMax && (r == '\n' || r == '\t' || r == '\r')) {
			return Invalid(field, "has the control character %U", r)
		}
	}
	return nil
}

// CheckName checks a text that tells one thing from another, such as a principal, a source or a lot. Beyond what CheckText
// asks, two of them that look alike should be alike: no space at either end, and no character that is not seen.
func CheckName(field, s string, bytesMin, bytesMax int) error {
	if err := CheckText(field, s, bytesMin, bytesMax); err != nil {
		return err
	}
	if strings.TrimSpace(s) != s {
		return Invalid(field, "%q: has space at its start or end", clip(s))
	}
	for _, r := range s {
		if unicode.IsControl(r) || r > unicode.MaxASCII && unicode.In(r, unicode.Cf, unicode.Zl, unicode.Zp) {
			return Invalid(field, "%s: has the invisible character %U", strconv.QuoteToASCII(clip(s)), r)
		}
	}
	return nil
}

func clip(s string) string {
	if len(s) > 80 {
		return s[:80] + "..."
	}
	return s
}
