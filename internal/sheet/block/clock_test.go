package block_test

import (
	"strings"
	"testing"

	"limitary/internal/sheet/block"
)

// TestTimes gives the same moments in every way they can be written. Serial numbers: 1 January 2000 is 36526 in the 1900
// system and 35064 in the 1904 system, 1,462 less (common practice); 46083 is 2 March 2026: 36526 + 26·365 + 7 leap days
// (2000 to 2024) + 31 + 28 + 1.
func TestTimes(t *testing.T) {
	for _, c := range []struct{ dates, zone, text, want string }{
		{"", "", "2026-03-02T09:30:00+01:00", "2026-03-02T09:30:00+01:00"},
		{"iso", "", "2026-03-02 09:30Z", "2026-03-02T09:30:00Z"},
		{"", "", "2026-03-02 09:30:05.25 +01:00", "2026-03-02T09:30:05.25+01:00"},
		{"", "+01:00", "2026-03-02T09:30", "2026-03-02T09:30:00+01:00"},
		{"", " 01:00", "2026-03-02T09:30", "2026-03-02T09:30:00+01:00"}, // as an address delivers a plus sign
		{"", "Europe/London", "2026-07-02T09:30", "2026-07-02T09:30:00+01:00"},
		{"", "Z", "2026-03-02", "2026-03-02T00:00:00Z"},
		{"", "Pacific/Apia", "2011-12-29T10:00", "2011-12-29T10:00:00-10:00"},
		{"", "Pacific/Apia", "2011-12-31T10:00", "2011-12-31T10:00:00+14:00"},
		{"", "+01:00", "2026-03-02T09:30:00Z", "2026-03-02T09:30:00Z"},
		{"dmy", "Z", "03/04/2026", "2026-04-03T00:00:00Z"},
		{"mdy", "Z", "03/04/2026 9:30", "2026-03-04T09:30:00Z"},
		{"dmy", "Z", "31.12.2026 09:30:01", "2026-12-31T09:30:01Z"},
		{"serial-1900", "Z", "36526", "2000-01-01T00:00:00Z"},
		{"serial-1904", "Z", "35064", "2000-01-01T00:00:00Z"},
		{"serial-1900", "Z", "46083.3958333333", "2026-03-02T09:30:00Z"},
		{"serial-1900", "+01:00", "46083,3958333333", "2026-03-02T09:30:00+01:00"},
		{"serial-1900", "Z", "1", "1900-01-01T00:00:00Z"},
		{"serial-1900", "Z", "59", "1900-02-28T00:00:00Z"},
		{"serial-1900", "Z", "61", "1900-03-01T00:00:00Z"},
		{"serial-1904", "Z", "0", "1904-01-01T00:00:00Z"},
		{"serial-1900", "Z", "46083.9999999999", "2026-03-03T00:00:00Z"},
	} {
		got, err := readTime(t, c.dates, c.zone, c.text)
		if err != nil || got != c.want {
			t.Errorf("dates=%s zone=%s %q: got %s, %v, want %s", c.dates, c.zone, c.text, got, err, c.want)
		}
	}
}

func TestTimesThatAreRefused(t *testing.T) {
	for _, c := range []struct{ dates, zone, text, want string }{
		{"", "Z", "03/04/2026", "dates=dmy or dates=mdy"},
		{"", "Z", "3.4.2026 09:30", "dates=dmy or dates=mdy"},
		{"", "Z", "46083.4", "dates=serial-1900 or dates=serial-1904"},
		{"", "", "2026-03-02T09:30", "no offset"},
		{"", "", "2026-03-02", "zone="},
		{"", "Z", "2026-02-30", "no such date"},
		{"", "Z", "yesterday", "want ISO 8601"},
		{"", "Z", "", "empty"},
		{"", "Z", "02/03/26", "want ISO 8601"},
		{"dmy", "Z", "31/12-2026", "want day, month and year"},
		{"dmy", "Z", "12/31/2026", "no such date"},
		{"mdy", "Z", "31/12/2026", "no such date"},
		{"dmy", "Z", "2026-03-02", "want day, month and year"},
		{"serial-1900", "Z", "60", "29 February 1900"},
		{"serial-1900", "Z", "60.5", "29 February 1900"},
		{"serial-1900", "Z", "2026-03-02", "want a serial number"},
		{"serial-1900", "Z", "-1", "want a serial number"},
		{"serial-1900", "Z", "3000001", "too large"},
		{"serial-1900", "", "46083", "no offset"},
		{"", "Europe/London", "2026-03-29T01:30", "does not exist"},
		{"", "Europe/London", "2026-10-25T01:30", "twice"},
		{"", "Pacific/Apia", "2011-12-30T10:00", "left out that day"}, // Samoa went over the date line from 29 to 31 December 2011
		{"dmy", "Pacific/Apia", "30.12.2011", "left out that day"},
		{"", "", "2026-03-02T09:30:00.1234567Z", "microsecond"},
	} {
		if got, err := readTime(t, c.dates, c.zone, c.text); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("dates=%s zone=%s %q: got %s, %v, want an error that says %q", c.dates, c.zone, c.text, got, err, c.want)
		}
	}
	for _, zone := range []string{"Mars/Olympus", "Local", "CET+1", "1:00", "../etc/passwd"} {
		if l, err := block.ParseZone(zone); err == nil {
			t.Errorf("zone %q: got %v", zone, l)
		}
	}
	if _, err := block.ParseDates("us"); err == nil {
		t.Error("dates=us was taken")
	}
}

func readTime(t *testing.T, dates, zone, text string) (string, error) {
	t.Helper()
	d, err := block.ParseDates(dates)
	if err != nil {
		t.Fatal(err)
	}
	z, err := block.ParseZone(zone)
	if err != nil {
		t.Fatal(err)
	}
	return block.Clock{Dates: d, Zone: z}.Read(text, 0)
}
