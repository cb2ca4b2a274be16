package definition

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"reflect"
	"strings"
	"time"

	"limitary/internal/chart"
	"limitary/internal/decimal"
	"limitary/internal/judge"
	"limitary/internal/limits"
)

// FutureMax is how far in the future a result may be measured: a clock or a zone is wrong beyond it.
const FutureMax = 24 * time.Hour

// Role says what a result was measured for. The numbers are stored.
type Role int16

const (
	// Routine is an ordinary control.
	Routine Role = 1
	// Repeat follows a failed control; it gets a verdict of its own and is no point.
	Repeat Role = 2
	// Overlap is measured side by side with the next lot.
	Overlap Role = 3
	// Setup is measured to set the chart up.
	Setup Role = 4
)

// Result is one posted control result. The JSON form is what the content digest covers: names never change.
type Result struct {
	Chart    string `json:"chart"`
	Source   string `json:"source"`
	SourceID string `json:"source_id"`
	// MeasuredAt is UTC in whole microseconds; MeasuredText is the time as posted, with its offset.
	MeasuredAt   time.Time `json:"measured_at"`
	MeasuredText string    `json:"-"`
	Lot          string    `json:"lot,omitempty"`
	RunID        string    `json:"run_id,omitempty"`
	Position     int32     `json:"position,omitempty"`
	Replicate    int32     `json:"replicate,omitempty"`
	Role         Role      `json:"role"`
	RepeatOf     string    `json:"repeat_of,omitempty"`
	Readings     []string  `json:"readings"`
	// Count takes the place of readings on a chart of counts.
	Count      *chart.Count      `json:"count,omitempty"`
	Unit       string            `json:"unit"`
	Material   string            `json:"material,omitempty"`
	Analyst    string            `json:"analyst,omitempty"`
	Instrument string            `json:"instrument,omitempty"`
	Labels     map[string]string `json:"labels,omitempty"`
}

// Canonical gives the content as the bytes its digest covers. Equal contents have equal bytes.
func (r *Result) Canonical() []byte {
	b, err := json.Marshal(r)
	if err != nil {
		panic(err) // strings, times and numbers always encode
	}
	return b
}

// Digest is SHA-256 over the content. Two posts with equal digests are the same content.
func (r Result) Digest() []byte {
	sum := sha256.Sum256(r.Canonical())
	return sum[:]
}

// ParseMeasuredAt reads an RFC 3339 time that has an offset, to the microsecond.
func ParseMeasuredAt(text string) (time.Time, error) {
	t, err := time.Parse(time.RFC3339Nano, text)
	if err == nil {
		t = t.UTC()
		if t.Nanosecond()%1000 != 0 {
			return time.Time{}, Invalid("measured_at", "%q: finer than a microsecond, which is the limit", clip(text))
		}
		if t.Year() < 1900 || t.Year() > 9998 {
			return time.Time{}, Invalid("measured_at", "%q: want a year from 1900 to 9998", clip(text))
		}
		return t, nil
	}
	for _, layout := range []string{"2006-01-02T15:04:05.999999999", "2006-01-02T15:04"} {
		if _, bare := time.Parse(layout, text); bare == nil {
			return time.Time{}, &Error{Reason: TimeWithoutOffset, Field: "measured_at",
				Text: fmt.Sprintf("%q has no offset from UTC; write Z, or an offset such as +01:00, after the time", clip(text))}
		}
	}
	return time.Time{}, Invalid("measured_at", "%q: want an RFC 3339 time with an offset, such as 2026-03-02T09:30:00+01:00", clip(text))
}

// Prepare checks a result against its chart and the present moment, fills what may be left out, and gives its readings.
func (r *Result) Prepare(c Chart, now time.Time) (judge.Point, error) {
	if err := r.checkTexts(); err != nil {
		return judge.Point{}, err
	}
	if c.Archived {
		return judge.Point{}, &Error{Reason: ChartArchived, Field: "chart", Text: fmt.Sprintf("%q is archived; nothing more is posted to it", c.Name)}
	}
	if c.LotsAreTracks && r.Lot == "" {
		return judge.Point{}, Invalid("lot", "is empty, and every lot of chart %q is a track of its own", c.Name)
	}
	if r.Unit == "" {
		r.Unit = c.Unit
	}
	if r.Unit != c.Unit {
		return judge.Point{}, &Error{Reason: WrongUnit, Field: "unit", Text: fmt.Sprintf("%q: chart %q is in %q", clip(r.Unit), c.Name, c.Unit)}
	}
	if r.Role == 0 {
		r.Role = Routine
	}
	if r.Role < Routine || r.Role > Setup {
		return judge.Point{}, Invalid("role", "%d: want ROUTINE, REPEAT, OVERLAP or SETUP", r.Role)
	}
	if r.Role == Repeat && r.RepeatOf == "" {
		return judge.Point{}, Invalid("repeat_of", "is empty; a repeat names the source id of the result it repeats")
	}
	if r.Role != Repeat && r.RepeatOf != "" {
		return judge.Point{}, Invalid("repeat_of", "is set, but the role is not REPEAT")
	}
	if r.Position < 0 || r.Replicate < 0 {
		return judge.Point{}, Invalid("position", "position %d, replicate %d: want 0 or more", r.Position, r.Replicate)
	}
	if r.MeasuredAt.After(now.Add(FutureMax)) {
		return judge.Point{}, &Error{Reason: TimeInFuture, Field: "measured_at",
			Text: fmt.Sprintf("%s is more than 24 hours after the present, %s", r.MeasuredAt.Format(time.RFC3339), now.UTC().Format(time.RFC3339))}
	}
	return r.Point(c)
}

func (r *Result) checkTexts() error {
	texts := []struct {
		field, value string
		min          int
		check        func(field, s string, bytesMin, bytesMax int) error
	}{
		{"source", r.Source, 1, CheckName}, {"source_id", r.SourceID, 1, CheckName}, {"lot", r.Lot, 0, CheckName},
		{"run_id", r.RunID, 0, CheckName}, {"repeat_of", r.RepeatOf, 0, CheckName}, {"unit", r.Unit, 0, CheckText},
		{"material", r.Material, 0, CheckText}, {"analyst", r.Analyst, 0, CheckText}, {"instrument", r.Instrument, 0, CheckText},
	}
	for _, t := range texts {
		if err := t.check(t.field, t.value, t.min, NameBytesMax); err != nil {
			return err
		}
	}
	return CheckLabels("labels", r.Labels)
}

// Point reads the readings, or the count, for the judge.
func (r *Result) Point(c Chart) (judge.Point, error) {
	if c.Kind.Counts() {
		return r.countPoint(c)
	}
	if r.Count != nil {
		return judge.Point{}, Invalid("count", "is given, but a chart of kind %s takes readings", c.Kind)
	}
	pt, err := r.readingsPoint(c.SubgroupSize)
	if !c.Standardised || err != nil {
		return pt, err
	}
	if r.Material == "" {
		return pt, Invalid("material", "is empty, and results of chart %q are standardised by their material", c.Name)
	}
	pt.Material = r.Material
	return pt, nil
}

func (r *Result) countPoint(c Chart) (judge.Point, error) {
	switch {
	case len(r.Readings) > 0:
		return judge.Point{}, Invalid("readings", "%d given, but a chart of kind %s takes a count", len(r.Readings), c.Kind)
	case r.Count == nil:
		return judge.Point{}, Invalid("count", "is not set; a chart of kind %s takes a count", c.Kind)
	}
	if err := c.Kind.CheckCount(*r.Count, c.SubgroupSize); err != nil {
		return judge.Point{}, Invalid("count", "%v", err)
	}
	count := *r.Count
	return judge.Point{Count: &count}, nil
}

func (r *Result) readingsPoint(subgroupSize int) (judge.Point, error) {
	if len(r.Readings) == 0 || len(r.Readings) > subgroupSize {
		return judge.Point{}, &Error{Reason: WrongReadingCount, Field: "readings",
			Text: fmt.Sprintf("%d readings: want 1 to %d, the subgroup size", len(r.Readings), subgroupSize)}
	}
	pt := judge.Point{Readings: make([]float64, len(r.Readings))}
	for i, text := range r.Readings {
		reading, err := decimal.ParseReading(text)
		if err != nil {
			var te *decimal.TextError
			errors.As(err, &te)
			return judge.Point{}, Invalid(fmt.Sprintf("readings[%d]", i), "%q %s", te.Text, te.Problem)
		}
		if math.Abs(reading.Value) > limits.MagnitudeMax {
			return judge.Point{}, Invalid(fmt.Sprintf("readings[%d]", i), "%q: the largest magnitude is %g", text, limits.MagnitudeMax)
		}
		pt.Readings[i] = reading.Value
		if reading.Bound != decimal.Measured {
			if pt.Bounds == nil {
				pt.Bounds = make([]decimal.Bound, len(r.Readings))
			}
			pt.Bounds[i] = reading.Bound
		}
	}
	return pt, nil
}

// Places gives the largest number of decimals among the readings as written.
func (r *Result) Places() int {
	places := 0
	for _, text := range r.Readings {
		if reading, err := decimal.ParseReading(text); err == nil {
			places = min(max(places, reading.Places), decimal.PlacesMax)
		}
	}
	return places
}

// OrderKey gives the result's place in its track as bytes that sort like the tuple measured-at, run id, position,
// replicate, source, source id. Texts sort by bytes and hold no control characters, so a zero byte ends each.
func (r *Result) OrderKey() []byte {
	b := make([]byte, 0, 24+len(r.RunID)+len(r.Source)+len(r.SourceID))
	b = binary.BigEndian.AppendUint64(b, uint64(r.MeasuredAt.UnixMicro())^1<<63)
	b = append(append(b, r.RunID...), 0)
	b = binary.BigEndian.AppendUint32(b, uint32(r.Position))
	b = binary.BigEndian.AppendUint32(b, uint32(r.Replicate))
	b = append(append(b, r.Source...), 0)
	return append(b, r.SourceID...)
}

// KeyTime gives the lowest order key of a moment: results measured at or after t have keys not below it.
func KeyTime(t time.Time) []byte {
	return binary.BigEndian.AppendUint64(nil, uint64(t.UnixMicro())^1<<63)
}

// SameContent reports whether two results would be one and the same post.
func (r Result) SameContent(other Result) bool {
	return string(r.Digest()) == string(other.Digest())
}

// JudgesAlike reports whether replacing r by other can change no verdict on chart c: same place, readings or count, role
// and lot, and the same material where that chooses the scale.
func (r Result) JudgesAlike(other Result, c Chart) bool {
	return string(r.OrderKey()) == string(other.OrderKey()) && r.Lot == other.Lot && r.Role == other.Role &&
		strings.Join(r.Readings, "\x00") == strings.Join(other.Readings, "\x00") && reflect.DeepEqual(r.Count, other.Count) &&
		(!c.Standardised || r.Material == other.Material)
}
