package block

import (
	"fmt"
	"math/big"
	"regexp"
	"strings"
	"time"
)

// Dates says how the times of a block are written.
type Dates string

const (
	// ISO is year-month-day, a T or a space, hours:minutes with optional seconds and fraction, and an offset ("Z",
	// "+01:00"), which may be left out, and so may the time of day, where a zone is named.
	ISO Dates = "iso"
	// DMY and MDY are day and month by number, separated by point, slash or hyphen, and a year of four digits.
	DMY Dates = "dmy"
	MDY Dates = "mdy"
	// Serial1900 counts days so that 1 is 1 January 1900, 60 is a 29 February 1900 that never was, and 61 is 1 March
	// (common practice of spreadsheet programs, no source). Serials from 60 to below 61 are refused.
	Serial1900 Dates = "serial-1900"
	// Serial1904 counts days so that 0 is 1 January 1904 (common practice, no source).
	Serial1904 Dates = "serial-1904"
)

// ParseDates reads the name of a way to write times; empty is ISO.
func ParseDates(name string) (Dates, error) {
	switch d := Dates(name); d {
	case "":
		return ISO, nil
	case ISO, DMY, MDY, Serial1900, Serial1904:
		return d, nil
	}
	return "", fmt.Errorf("dates=%s: want iso, dmy, mdy, serial-1900 or serial-1904", clip(name))
}

// ParseZone reads an offset from UTC ("Z", "+01:00") or the name of a zone ("Europe/London"). An empty name gives none.
func ParseZone(name string) (*time.Location, error) {
	if name == "" {
		return nil, nil
	}
	if t, err := time.Parse("Z07:00", strings.Replace(name, " ", "+", 1)); err == nil { // a plus sign of an address is read as a space
		_, seconds := t.Zone()
		return time.FixedZone("", seconds), nil
	}
	if l, err := time.LoadLocation(name); err == nil && name != "Local" && strings.Contains(name, "/") || name == "UTC" {
		return l, nil
	}
	return nil, fmt.Errorf("zone=%s: want an offset such as +01:00 or Z, or a zone such as Europe/London", clip(name))
}

// Clock reads times.
type Clock struct {
	Dates Dates
	// Zone is that of times without an offset; nil where none is named.
	Zone *time.Location
}

// measuredLayout writes a time as the service takes it.
const measuredLayout = "2006-01-02T15:04:05.999999Z07:00"

// Read gives a time as RFC 3339 with an offset. The decimal is that of serial numbers, '.', ',' or 0 where none is known.
func (c Clock) Read(text string, decimal byte) (string, error) {
	s := strings.Trim(text, " \u00a0\u202f")
	if s == "" {
		return "", fmt.Errorf("is empty; every result needs the time it was measured")
	}
	var t time.Time
	var err error
	switch c.Dates {
	case Serial1900, Serial1904:
		t, err = c.serial(s, decimal)
	case DMY, MDY:
		t, err = c.byNumber(s)
	default:
		t, err = c.iso(s)
	}
	if err != nil {
		return "", err
	}
	return t.Format(measuredLayout), nil
}

var (
	isoForm      = regexp.MustCompile(`^(\d{4}-\d{2}-\d{2})(?:[T ](\d{2}:\d{2}(?::\d{2}(?:\.\d{1,9})?)?)\s?(Z|[+-]\d{2}:\d{2})?)?$`)
	byNumberForm = regexp.MustCompile(`^(\d{1,2})([./-])(\d{1,2})([./-])(\d{4})(?:[ T](\d{1,2}:\d{2}(?::\d{2}(?:\.\d{1,6})?)?))?$`)
	bareNumber   = regexp.MustCompile(`^\d+(?:[.,]\d+)?$`)
)

const wantISO = "want ISO 8601 such as 2026-03-02T09:30:00+01:00"

func (c Clock) iso(s string) (time.Time, error) {
	m := isoForm.FindStringSubmatch(s)
	switch {
	case m == nil && byNumberForm.MatchString(s):
		return time.Time{}, fmt.Errorf("%q: day and month may be either; write %s, or say dates=dmy or dates=mdy", clip(s), strings.TrimPrefix(wantISO, "want "))
	case m == nil && bareNumber.MatchString(s):
		return time.Time{}, fmt.Errorf("%q is a number; say dates=serial-1900 or dates=serial-1904 if it is a date of a spreadsheet, or write %s", clip(s), strings.TrimPrefix(wantISO, "want "))
	case m == nil:
		return time.Time{}, fmt.Errorf("%q: %s", clip(s), wantISO)
	}
	clock := m[2]
	if clock == "" {
		clock = "00:00"
	}
	if strings.Count(clock, ":") == 1 {
		clock += ":00"
	}
	if m[3] != "" {
		return parsed(time.RFC3339Nano, m[1]+"T"+clock+m[3], s)
	}
	wall, err := parsed("2006-01-02T15:04:05.999999999", m[1]+"T"+clock, s)
	if err != nil {
		return time.Time{}, err
	}
	return c.local(wall, s)
}

func parsed(layout, text, as string) (time.Time, error) {
	t, err := time.Parse(layout, text)
	if err != nil {
		return t, fmt.Errorf("%q: there is no such date or time", clip(as))
	}
	if t.Nanosecond()%1000 != 0 {
		return t, fmt.Errorf("%q: finer than a microsecond, which is the limit", clip(as))
	}
	return t, nil
}

func (c Clock) byNumber(s string) (time.Time, error) {
	m := byNumberForm.FindStringSubmatch(s)
	if m == nil || m[2] != m[4] {
		want := "day, month and year such as 31/12/2026 or 31.12.2026 09:30"
		if c.Dates == MDY {
			want = "month, day and year such as 12/31/2026 or 12/31/2026 09:30"
		}
		return time.Time{}, fmt.Errorf("%q: want %s", clip(s), want)
	}
	day, month, clock := m[1], m[3], m[6]
	if c.Dates == MDY {
		day, month = month, day
	}
	if clock == "" {
		clock = "0:00"
	}
	if strings.Count(clock, ":") == 1 {
		clock += ":00"
	}
	wall, err := parsed("2/1/2006 15:04:05.999999", day+"/"+month+"/"+m[5]+" "+clock, s)
	if err != nil {
		return time.Time{}, err
	}
	return c.local(wall, s)
}

const (
	// serialBytesMax bounds the text of a serial number; a double needs no more than 25 digits.
	serialBytesMax = 32
	// serialMax bounds the number: the year 10113.
	serialMax = 3_000_000
)

// serial reads a count of days. The text is taken exactly and rounded to the millisecond, which undoes the rounding of a
// program that keeps 15 digits.
func (c Clock) serial(s string, decimal byte) (time.Time, error) {
	number, err := Dialect{Delimiter: Tab, Decimal: decimal}.Number(s)
	if err != nil || !bareNumber.MatchString(s) || len(s) > serialBytesMax {
		return time.Time{}, fmt.Errorf("%q: want a serial number of days such as 46083.395833, as dates=%s says", clip(s), c.Dates)
	}
	days, _ := new(big.Rat).SetString(number) // digits and at most one point always are a number
	epoch := time.Date(1904, 1, 1, 0, 0, 0, 0, time.UTC)
	if c.Dates == Serial1900 {
		epoch = time.Date(1899, 12, 30, 0, 0, 0, 0, time.UTC)
		switch {
		case days.Cmp(big.NewRat(60, 1)) < 0:
			epoch = epoch.AddDate(0, 0, 1)
		case days.Cmp(big.NewRat(61, 1)) < 0:
			return time.Time{}, fmt.Errorf("%q is 29 February 1900, which never was", clip(s))
		}
	}
	if days.Cmp(big.NewRat(serialMax, 1)) > 0 {
		return time.Time{}, fmt.Errorf("%q: too large for a date", clip(s))
	}
	const dayMillis = 24 * 60 * 60 * 1000
	millis := new(big.Rat).Mul(days, big.NewRat(dayMillis, 1))
	half := new(big.Rat).Add(millis, big.NewRat(1, 2))
	whole := new(big.Int).Quo(half.Num(), half.Denom()).Int64()
	return c.local(epoch.AddDate(0, 0, int(whole/dayMillis)).Add(time.Duration(whole%dayMillis)*time.Millisecond), s)
}

// local puts a wall-clock time into the zone. A time that the zone skips or has twice is refused.
func (c Clock) local(wall time.Time, as string) (time.Time, error) {
	if c.Zone == nil {
		return time.Time{}, fmt.Errorf("%q has no offset from UTC; write it after the time, or say zone=, such as zone=%%2B01:00 or zone=Europe/London", clip(as))
	}
	y, mo, d := wall.Date()
	h, mi, s := wall.Clock()
	t := time.Date(y, mo, d, h, mi, s, wall.Nanosecond(), c.Zone)
	if t.Format(time.DateOnly) != wall.Format(time.DateOnly) {
		return time.Time{}, fmt.Errorf("%q does not exist in %s, which left out that day or hour; write it with its offset", clip(as), c.Zone)
	}
	if th, tm, _ := t.Clock(); th != h || tm != mi {
		return time.Time{}, fmt.Errorf("%q does not exist in %s, where the clock was put forward; write it with its offset", clip(as), c.Zone)
	}
	for _, shift := range []time.Duration{-2 * time.Hour, -time.Hour, -30 * time.Minute, 30 * time.Minute, time.Hour, 2 * time.Hour} {
		if other := t.Add(shift); other.Format("2006-01-02T15:04:05") == t.Format("2006-01-02T15:04:05") {
			return time.Time{}, fmt.Errorf("%q was twice in %s, where the clock was put back; write it with its offset", clip(as), c.Zone)
		}
	}
	return t, nil
}
