package sheet

import (
	"errors"
	"fmt"
	"net/http"
	"net/http/httptest"
	"net/url"
	"os"
	"reflect"
	"strings"
	"testing"

	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/book"
)

// TestAddressesAsSpreadsheetsWriteThem reads queries with what formulas put into them.
func TestAddressesAsSpreadsheetsWriteThem(t *testing.T) {
	known := []string{"values", "zone", "lot", "label"}
	for raw, want := range map[string]url.Values{
		"":                            {},
		"values=1;2;3":                {"values": {"1;2;3"}},
		"values=1,5&zone=+01:00":      {"values": {"1,5"}, "zone": {"+01:00"}},
		"zone=%2B01:00":               {"zone": {"+01:00"}},
		"lot=A%201%26%25":             {"lot": {"A 1&%"}},
		"lot=a=b&&values=":            {"lot": {"a=b"}, "values": {""}},
		"label=site:a&label=method:b": {"label": {"site:a", "method:b"}},
	} {
		if got, err := parseQuery(raw, known); err != nil || !reflect.DeepEqual(got, want) {
			t.Errorf("%s: got %v, %v, want %v", raw, got, err, want)
		}
	}
	for raw, want := range map[string]string{
		"lot=%zz":        "percent-encode",
		"lot=50%":        "percent-encode",
		"lots=a":         "lots: is no parameter here; there are values, zone, lot, label",
		"lot=a&lot=b":    "lot: is given twice",
		"k\x01=1":        "is no parameter here",
		"key=lim_secret": "key: is no parameter here",
	} {
		if got, err := parseQuery(raw, known); err == nil || !strings.Contains(err.Error(), want) || strings.Contains(err.Error(), "secret") {
			t.Errorf("%q: got %v, %v, want %s", raw, got, err, want)
		}
	}
}

func TestPathsFindTheirRoute(t *testing.T) {
	for path, want := range map[string]struct {
		route string
		args  []string
	}{
		"GET /sheet/limit/nitrate/centre":      {"limit/{}/{}", []string{"nitrate", "centre"}},
		"HEAD /sheet/state/nitrate":            {"state/{}", []string{"nitrate"}},
		"GET /sheet/limits.csv":                {"limits.*", []string{"csv"}},
		"GET /sheet/results/nitrate.xlsx":      {"results/{}.*", []string{"nitrate", "xlsx"}},
		"POST /sheet/results/nitrate":          {"results/{}", []string{"nitrate"}},
		"GET /sheet/signals/nitrate":           {"signals/{}", []string{"nitrate"}},
		"GET /sheet/signals.tsv":               {"signals.*", []string{"tsv"}},
		"POST /sheet/batch":                    {"batch", nil},
		"GET /sheet/limit/nitrate":             {},
		"GET /sheet/limit//centre":             {},
		"GET /sheet/limit/nitrate/centre/more": {},
		"GET /sheet/":                          {},
		"GET /sheet/results/nitrate":           {},
		"GET /sheet/.csv":                      {},
	} {
		method, target, _ := strings.Cut(path, " ")
		rt, args, _ := find(httptest.NewRequest(method, target, nil))
		if got := routeName(rt); got != want.route || !reflect.DeepEqual(args, want.args) {
			t.Errorf("%s: got %s %q, want %s %q", path, got, args, want.route, want.args)
		}
	}
}

func routeName(rt *route) string {
	if rt == nil {
		return ""
	}
	return rt.path
}

func TestPostsAreOnlyWhatStores(t *testing.T) {
	for target, want := range map[string]bool{"POST /sheet/results/a": true, "GET /sheet/results/a.csv": false, "POST /sheet/judge/a": false, "POST /sheet/batch": false} {
		method, path, _ := strings.Cut(target, " ")
		if got := Posts(httptest.NewRequest(method, path, nil)); got != want {
			t.Errorf("%s: got %t", target, got)
		}
	}
}

// TestErrorsHaveTheirStatus says which errors a cell answers as text.
func TestErrorsHaveTheirStatus(t *testing.T) {
	for _, c := range []struct {
		err      error
		status   int
		text     string
		expected bool
	}{
		{refuse("no %s", "x"), 400, "no x", true},
		{&refusal{status: 422, text: "nothing stored"}, 422, "nothing stored", true},
		{&refusal{status: 404, text: "no file"}, 404, "no file", false},
		{status.Error(codes.NotFound, `evaluations[0].chart.name: there is no chart "x"`), 404, `there is no chart "x"`, true},
		{status.Error(codes.InvalidArgument, "evaluations[0].points.points[3].readings: 4 readings"), 400, "4 readings", true},
		{status.Error(codes.InvalidArgument, "evaluations[0].points.points[0].readings: are given, but a chart of kind p takes counts"), 400,
			"readings are given, but a chart of kind p takes counts" + wantInspected, true},
		{status.Error(codes.InvalidArgument, "version: 3"), 400, "version: 3", true},
		{status.Error(codes.FailedPrecondition, "none"), 400, "none", true},
		{status.Error(codes.Unauthenticated, "no key"), 401, "no key", false},
		{status.Error(codes.PermissionDenied, "no role"), 403, "no role", false},
		{status.Error(codes.ResourceExhausted, "busy"), 429, "busy", false},
		{status.Error(codes.Unavailable, "later"), 503, "later", false},
		{status.Error(codes.DeadlineExceeded, "late"), 504, "late", false},
		{status.Error(codes.Internal, "secret"), 500, "a fault of the service; its log tells more", false},
		{errors.New("secret"), 500, "a fault of the service; its log tells more", false},
	} {
		if code, text, expected := explain(c.err); code != c.status || text != c.text || expected != c.expected {
			t.Errorf("%v: got %d %q %t, want %d %q %t", c.err, code, text, expected, c.status, c.text, c.expected)
		}
	}
}

func TestTagsMatchWeakly(t *testing.T) {
	for given, want := range map[string]bool{`"a"`: true, `W/"a"`: true, `"b"`: false, `"b", W/"a"`: true, "*": true, "": false, `a`: false} {
		if got := matches([]string{given}, `W/"a"`); got != want {
			t.Errorf("%s: got %t", given, got)
		}
	}
	if a, b := textAnswer("10").tag(), textAnswer("11").tag(); a == b || a != textAnswer("10").tag() {
		t.Errorf("tags %s and %s", a, b)
	}
}

// TestPointsOfTexts makes points of what stands in cells.
func TestPointsOfTexts(t *testing.T) {
	for _, c := range []struct {
		texts           []string
		inspected, want string
	}{
		{[]string{"10.30", "-9.8"}, "", "readings:{values:10.3 values:-9.8} material:\"m\""},
		{[]string{"<0.05", "10", ">3"}, "", "readings:{values:0.05 values:10 values:3 bounds:READING_BOUND_BELOW bounds:READING_BOUND_UNSPECIFIED bounds:READING_BOUND_ABOVE} material:\"m\""},
		{[]string{"3"}, "100", "count:{nonconforming:3 inspected:100} material:\"m\""},
		{[]string{"0"}, "2.5", "count:{inspected:2.5} material:\"m\""},
		{[]string{"3", "4"}, "100", "2 values, and inspected=100: a count is one value"},
		{[]string{"<3"}, "100", "\"<3\": a count is a number"},
		{[]string{"ten"}, "", "reading \"ten\""},
		{[]string{"3"}, "many", "reading \"many\""},
	} {
		p, err := pointOf(c.texts, c.inspected, "m")
		if got := strings.ReplaceAll(fmt.Sprint(p), "  ", " "); err == nil && got != c.want || err != nil && !strings.HasPrefix(err.Error(), c.want) {
			t.Errorf("%q of %q: got %s, %v", c.texts, c.inspected, got, err)
		}
	}
}

// TestVersionsInMemoryAreBounded fills the memory over its bound.
func TestVersionsInMemoryAreBounded(t *testing.T) {
	c := newVersions()
	for i := range versionsMax + 50 {
		c.put(&pb.Version{Chart: "c", Number: int32(i)})
	}
	if n := len(c.byKey); n != versionsMax || c.get("c", versionsMax+49) == nil {
		t.Errorf("%d versions are kept, want %d and the latest among them", n, versionsMax)
	}
}

func TestAnOptionsRequestNamesTheMethods(t *testing.T) {
	w := httptest.NewRecorder()
	(&Handler{}).ServeHTTP(w, httptest.NewRequest(http.MethodOptions, "/sheet/batch", nil))
	if w.Code != http.StatusNoContent || w.Header().Get("Allow") != "GET, HEAD, POST, OPTIONS" {
		t.Errorf("got %d %v", w.Code, w.Header())
	}
}

// TestTheManualNamesEveryPathAndParameter holds the package comment against the routes.
func TestTheManualNamesEveryPathAndParameter(t *testing.T) {
	source, err := os.ReadFile("sheet.go")
	if err != nil {
		t.Fatal(err)
	}
	manual, _, _ := strings.Cut(string(source), "\npackage sheet\n")
	for _, rt := range routes {
		path := "/sheet/" + strings.Replace(strings.TrimSuffix(rt.path, ".*"), "{}", "{chart}", 1)
		path = strings.Replace(path, "/kit/{chart}", "/kit/{file}", 1)
		if path = strings.Replace(path, "{}", "{name}", 1); !strings.Contains(manual, path) {
			t.Errorf("the manual has no %s", path)
		}
		for _, name := range rt.params {
			if !strings.Contains(manual, name+"=") {
				t.Errorf("the manual has no %s=", name)
			}
		}
	}
}

// TestUsesOfColumns tells what columns of a workbook are for.
func TestUsesOfColumns(t *testing.T) {
	for _, c := range []struct {
		query string
		want  map[string]book.Use
	}{
		{"", map[string]book.Use{"Value": book.Reading, "reading_2": book.Reading, "nonconforming": book.Reading, "inspected": book.Reading, "id": book.Text,
			"measured_at": book.Any, "Lot": book.Text, "chart": book.Text, "source": book.Text, "nitrate": book.Any}},
		{"values=nitrate,%20nitrite&id=sample&time=when", map[string]book.Use{"value": book.Other, "Nitrate": book.Reading, "nitrite": book.Reading, "id": book.Other,
			"sample": book.Text, "time": book.Other, "when": book.Any, "lot": book.Text, "note": book.Other, "inspected": book.Reading}},
	} {
		query, err := parseQuery(c.query, []string{"values", "id", "time"})
		if err != nil {
			t.Fatal(err)
		}
		for name, want := range c.want {
			if got := (&request{query: query}).use(name); got != want {
				t.Errorf("%q, column %s: got %d, want %d", c.query, name, got, want)
			}
		}
	}
}

// TestWhatMayBeATokenIsRedacted keeps ordinary texts.
func TestWhatMayBeATokenIsRedacted(t *testing.T) {
	token := "lim_" + strings.Repeat("a", 16) + "_" + strings.Repeat("7", 52)
	for text, want := range map[string]string{
		"there is no /sheet/" + token + "/x": "there is no /sheet/lim_(redacted)/x", strings.ToUpper(token): "lim_(redacted)", token[:12] + "...": "lim_(redacted)...",
		"slim_chart and lim_a": "slim_chart and lim_a", "limitary_standing": "limitary_standing",
	} {
		if got := redact(text); got != want {
			t.Errorf("%s: got %s, want %s", text, got, want)
		}
	}
}
