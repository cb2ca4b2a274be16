package kit_test

import (
	"bytes"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/xuri/excelize/v2"

	"limitary/internal/sheet/kit"
)

func content(t *testing.T, name, address string) string {
	t.Helper()
	f, ok := kit.Find(name)
	if !ok {
		t.Fatalf("there is no %s", name)
	}
	data, err := f.Bytes(address)
	if err != nil {
		t.Fatal(err)
	}
	return string(data)
}

func TestEveryFileSaysWhatItIs(t *testing.T) {
	listing := content(t, "", kit.Service)
	var notRun []string
	for _, f := range kit.Files() {
		for _, said := range []string{f.Name, f.ContentType, f.Title, f.Install, f.Limits, f.Run} {
			if said == "" || strings.TrimSpace(said) != said || strings.Contains(said, "\n") {
				t.Errorf("%s: %+v", f.Name, f)
			}
			if f.Name != kit.IndexName && !strings.Contains(listing, said) && said != f.ContentType {
				t.Errorf("%s: the listing does not say %q", f.Name, said)
			}
		}
		if strings.HasPrefix(f.Run, "not run here") {
			notRun = append(notRun, f.Name)
		} else if f.Name != kit.IndexName && !strings.HasPrefix(f.Run, "yes, ") {
			t.Errorf("%s was run: %q", f.Name, f.Run)
		}
		if content(t, f.Name, kit.Service) == "" {
			t.Errorf("%s is empty", f.Name)
		}
	}
	if got := strings.Join(notRun, " "); got != "limitary-vba.bas limitary-browser.js limitary-table.pq" {
		t.Errorf("not run here: %s", got)
	}
	for _, name := range []string{"nothing", "../kit.go", "files/formulas.txt"} {
		if f, ok := kit.Find(name); ok {
			t.Errorf("%s is %+v", name, f)
		}
	}
}

// TestFilesNameTheServiceAsked puts plain addresses in, and leaves out what would change a line of a program.
func TestFilesNameTheServiceAsked(t *testing.T) {
	for _, name := range []string{"limitary-libreoffice.bas", "limitary-vba.bas", "limitary-browser.js", "limitary-table.pq", kit.IndexName} {
		for _, address := range []string{"https://limits.example", "http://10.0.0.1:7410", "https://[2001:db8::1]:443"} {
			if got := content(t, name, address); strings.Contains(got, kit.Service) || !strings.Contains(got, address) {
				t.Errorf("%s does not name %s", name, address)
			}
		}
		whole := content(t, name, kit.Service)
		for _, address := range []string{"", "limits.example", "ftp://limits.example", `http://x"&Shell("y")&"`, "http://x\nShell", "http://user@x", "http://x/path", "http://-x", "http://" + strings.Repeat("x", 254)} {
			if content(t, name, address) != whole {
				t.Errorf("%s took the address %q", name, address)
			}
		}
	}
}

func TestBasicComesWithTheLineEndsItsEditorsImport(t *testing.T) {
	for _, f := range kit.Files() {
		got := content(t, f.Name, kit.Service)
		lines, ended := strings.Count(got, "\n"), strings.Count(got, "\r\n")
		if basic := strings.HasSuffix(f.Name, ".bas"); f.Name != "formulas.xlsx" && (basic && ended != lines || !basic && ended != 0) {
			t.Errorf("%s has %d lines, %d with CRLF", f.Name, lines, ended)
		}
		if f.Name != "formulas.xlsx" && strings.IndexFunc(got, func(r rune) bool { return r > '~' }) >= 0 {
			t.Errorf("%s is not ASCII, which not every editor of macros reads alike", f.Name)
		}
	}
}

var quoted = regexp.MustCompile(`"[^"]*"`)

// withSemicolons separates the arguments of a formula by semicolons; text in quotes stays.
func withSemicolons(formula string) string {
	out, last := "", 0
	for _, at := range quoted.FindAllStringIndex(formula, -1) {
		out += strings.ReplaceAll(formula[last:at[0]], ",", ";") + formula[at[0]:at[1]]
		last = at[1]
	}
	return out + strings.ReplaceAll(formula[last:], ",", ";")
}

func TestBothListsHoldTheSameFormulas(t *testing.T) {
	commas, semicolons := kit.Formulas(kit.WithCommas), kit.Formulas(kit.WithSemicolons)
	if len(commas) != 10 || len(commas) != len(semicolons) {
		t.Fatalf("%d and %d formulas", len(commas), len(semicolons))
	}
	for i, f := range commas {
		f.Text = withSemicolons(f.Text)
		if f != semicolons[i] {
			t.Errorf("got  %+v\nwant %+v", semicolons[i], f)
		}
	}
	for form, want := range map[kit.Form]int{kit.PointLocale: 1, kit.CommaLocale: 1, kit.Browser: 4, "": 0} {
		if got := len(kit.Formulas(form)); got != want {
			t.Errorf("%s: %d formulas, want %d", form, got, want)
		}
	}
	if all := strings.Count(content(t, "formulas.txt", kit.Service), "\n    ="); all != 2*len(commas)+6 {
		t.Errorf("the page has %d formulas, of which some are under no heading", all)
	}
}

// TestTheWorkbookHoldsThePage compares its formulas with those of the page, and looks for a key.
func TestTheWorkbookHoldsThePage(t *testing.T) {
	f, err := excelize.OpenReader(bytes.NewReader([]byte(content(t, "formulas.xlsx", "https://limits.example"))))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := f.GetRows(kit.SettingsSheet)
	if err != nil || len(rows) < 3 || strings.Join(rows[0], " ") != "limitary_base https://limits.example" || strings.Join(rows[2], "") != "limitary_key" {
		t.Errorf("settings: %q, %v", rows, err)
	}
	for i, want := range kit.Formulas(kit.WithCommas) {
		at, err := excelize.CoordinatesToCellName(2, kit.FormulaRow+i)
		if err != nil {
			t.Fatal(err)
		}
		got, err := f.GetCellFormula(kit.FormulaSheet, at)
		if plain := strings.NewReplacer("_xlfn.", "", kit.ResultsSheet+"!", "").Replace(got); err != nil || "="+plain != want.Text {
			t.Errorf("%s: got %s, %v, want %s", want.Gives, got, err, want.Text)
		}
	}
}

// TestAllFilesAgreeOnTheColumnsOfText compares the lists by which each program tells text from numbers in the table of limits.
func TestAllFilesAgreeOnTheColumnsOfText(t *testing.T) {
	want := strings.Fields("chart title lot unit kind track_state effective_from provisional rules dispersion_rules")
	word := regexp.MustCompile(`[a-z_]+`)
	for name, list := range map[string]*regexp.Regexp{
		"limitary-libreoffice.bas": regexp.MustCompile(`InStr\(" (chart [a-z_ ]+) "`),
		"limitary-vba.bas":         regexp.MustCompile(`InStr\(" (chart [a-z_ ]+) "`),
		"limitary-browser.js":      regexp.MustCompile(`TEXT_COLUMNS = \[(.*)\]`),
		"limitary-table.pq":        regexp.MustCompile(`Texts = \{(.*)\}`),
	} {
		m := list.FindStringSubmatch(content(t, name, kit.Service))
		if m == nil || !slices.Equal(word.FindAllString(m[1], -1), want) {
			t.Errorf("%s: %q", name, m)
		}
	}
}
