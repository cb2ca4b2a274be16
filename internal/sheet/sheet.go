// Package sheet is the face of the service for spreadsheets: values as text, tables, and pasted blocks that come back judged.
//
// It is a client of the API and nothing else: every answer comes through the generated clients, so that keys, roles, limits
// and the judge act as they do for any caller. The package comment is the manual; all paths are under /sheet/.
//
// # Keys
//
// A key travels as "Authorization: Bearer TOKEN". Where a formula cannot set a header it may be ?key=TOKEN, but only a key
// whose one role is reader, and only in a read: an address is kept in histories and workbooks. A key that may write is
// refused in an address with 403 and ought to be revoked, since it has been shown. Make sheet keys for reader, limited by
// labels, with an early end. Every answer has "Referrer-Policy: no-referrer"; keys are redacted in the log.
//
// # One-cell reads
//
// GET, answered as one line of UTF-8 text without a line end. What a caller can expect to go wrong (no such chart, nothing
// in force, not a number) is a line that begins "refused: ", with status 200, because a cell shows nothing else; faults
// (no key, too many reads, a fault of the service) have their status. An address may have 2,048 characters.
//
//	/sheet/limit/{chart}/{name}   a number or short text of the version in force; see Names. lot= chooses the track,
//	                              version= pins an approved version, whose answer never changes. Centre, sigma and lines are
//	                              on the scale that is judged; the name "scale" tells it where it is not the chart's unit.
//	                              unit=original gives the centre and the lines in the chart's unit where they are judged
//	                              on another scale: after a logarithm or a square root (the centre is then a median), or
//	                              standardised, where material= names the level.
//	/sheet/verdict/{chart}        value= one result, its readings separated by ";"; values= several results, separated by "|"
//	                              (or by ";" where a result is one reading); "<0.05" is less than 0.05. inspected= makes
//	                              them counts out of so many, material= names the level of a standardised track. Judged as
//	                              the next points of the stored track, measured now, exactly as posting would; or alone
//	                              with alone=1, then with version= too. The answer begins "not recorded; " and names the
//	                              worst standing, the version, the track's state and the result they come after.
//	/sheet/state/{chart}          CLEAR, OPEN_SIGNAL or HOLD; lot= where lots are tracks.
//	/sheet/signals/{chart}        how many signals are open; lot= for one track only.
//
// decimal=comma gives and takes numbers with a decimal comma. A semicolon or a plus sign in an address may stand as it is;
// a space, "#", "%" and "&" must be percent-encoded.
//
// # Many at once
//
//	/sheet/batch?keys=CHART/NAME,CHART/NAME...  one row each, in order: key, value, version, note. NAME is one of Names,
//	                                            "state" or "signals". POST takes the keys as the body, one a line or with
//	                                            commas, as text. What is not known has a blank value and a note.
//	/sheet/limits.csv                           the limits in force of every chart, or of those with label=KEY:VALUE (may
//	                                            be repeated).
//	/sheet/results/{chart}.csv                  stored results, from= and to= (RFC 3339), lot=.
//	/sheet/verdicts/{chart}.csv                 their verdicts with statistics and lines.
//	/sheet/signals.csv                          signals, chart=, label=, status=open|closed|merged|retracted.
//	/sheet/workbook/{chart}.xlsx                all of it for one chart.
//
// Every table is there as .csv (separated by commas, or as delimiter= says), .tsv and .xlsx. Text that a program could take
// for a formula has an apostrophe before it; numbers stay numbers. A workbook has a sheet "About" with the safety text.
//
// # Blocks
//
// POST, with a pasted block or a file as the body: text as package block describes, or an .xlsx workbook, of which sheet=
// and header_row= name the sheet (not needed where there is one) and the row of the column names (1). The first row holds
// the column names, unless header=no. The block comes back in its own dialect with more columns to the right, whose names
// begin with "limitary_"; those that an earlier answer added are replaced.
//
//	/sheet/judge/{chart}    adds standing, rules, version, note. Rows are judged in their order as the next points of the
//	                        stored track, or alone=1. Nothing is stored. A row with the role REPEAT, or voided, is no point
//	                        and says so in its note; other roles than ROUTINE are judged, and named there.
//	/sheet/results/{chart}  stores the rows and adds outcome, standing, rules, version, track_state, note. Role: poster. Posting the
//	                        same block again changes nothing and says DUPLICATE. Rows are stored all or none: one bad row
//	                        is named by row and column with status 422, and nothing is stored; all_or_nothing=0 stores
//	                        the good rows. preview=1 stores nothing and shows what would be stored, if nothing else is
//	                        stored under the same ids: it does not look at what is. A row with the id and the content of
//	                        an earlier row is DUPLICATE; one with other content is refused and names that row. Rows that
//	                        an exported table marks as voided are refused.
//
// Columns are found by name, or named by the caller: values=COLUMN,COLUMN (else value, reading or result, with a number after
// it where there are several, or nonconforming; else the only column; names of different words, such as value and result, or
// the same number twice are refused), id=COLUMN (else id or source_id), time=COLUMN (else time or
// measured_at), source= the system the results come from (else a column source). lot, run_id, position, replicate, role,
// repeat_of, unit, material, inspected, analyst, instrument, chart and voided are columns where they are there; lot=, material=
// and inspected= serve where there is none and where a cell of it is blank. A row whose chart, lot or material is not what the
// address says is refused, and so is one in another unit than the chart's. Columns that hold something and are not read are
// named in the note of the first row. A row in which inspected is not blank holds a count: how many of so many do not
// conform. Three digits after the only mark of a count ("1.000") are refused unless decimal= is said, here and in addresses.
// refusals=text answers a refused block with status 200 and one line that begins "refused: ", for macro languages
// that show no body beside another status; faults keep theirs.
// decimal=point|comma, delimiter=tab|comma|semicolon|none, dates=iso|dmy|mdy|serial-1900|serial-1904 and zone= (an offset
// or a name such as Europe/London) say what the block does not; a workbook's own date system cannot be said otherwise. Without a header columns are column_1, column_2 and so on.
//
// # The kit
//
//	/sheet/kit              lists formulas, macros and scripts for spreadsheet programs, with how each is installed.
//	/sheet/kit/{file}       a file of it, written for the address that was asked. No key is needed.
//
// # Caching, rate, browsers
//
// ETag is a digest of the answer; If-None-Match gets 304. Answers for a pinned version are immutable, all others must be
// asked for again; all are private. Reads are limited for each key (5,000 at once and 200 a second, unless the server is
// told otherwise), and so is their number in work, with Retry-After; posts take no part in either. Other origins may read
// and judge with a bearer token, since no cookies are ever used; they may not post results. HEAD and OPTIONS are answered.
package sheet

import (
	"net/http"
	"slices"
	"strings"
	"time"

	"google.golang.org/grpc"

	pb "limitary/api/limitary/v1"
)

// Limits of requests and answers.
const (
	// AddressCharsMax bounds an address that is read; spreadsheet programs cut off or refuse longer ones (common practice).
	AddressCharsMax = 2048
	// KeysMax bounds the keys of one batch.
	KeysMax = 5_000
	// ChartsMax bounds the charts of one table.
	ChartsMax = 2_000
	// RowsOutMax bounds the rows of a table of results or signals.
	RowsOutMax = 20_000
	// workbooksMax bounds the workbooks in work; others wait.
	workbooksMax = 2
	// ValuesMax bounds the results judged by one one-cell read.
	ValuesMax = 500
)

// Handler answers under /sheet/. The caller of ServeHTTP has put credentials into the outgoing metadata of the request's
// context; a missing or wrong key is then refused by the services.
type Handler struct {
	charts      pb.ChartServiceClient
	limits      pb.LimitServiceClient
	evaluations pb.EvaluationServiceClient
	signals     pb.SignalServiceClient
	now         func() time.Time
	approved    *versions
	// scheme is that of the address by which callers reach the service.
	scheme string
	// workbooks has room for those that are read or written at once: the largest take hundreds of megabytes on the way.
	workbooks chan struct{}
}

// New makes a handler that asks the services behind a connection. Scheme is http, or https where callers come by TLS.
func New(conn grpc.ClientConnInterface, scheme string, now func() time.Time) *Handler {
	return &Handler{charts: pb.NewChartServiceClient(conn), limits: pb.NewLimitServiceClient(conn),
		evaluations: pb.NewEvaluationServiceClient(conn), signals: pb.NewSignalServiceClient(conn), now: now, scheme: scheme, approved: newVersions(), workbooks: make(chan struct{}, workbooksMax)}
}

// Posts reports a request that stores results, as opposed to one that only reads: the rate of reads, keys in addresses and
// other origins are a matter of reads.
func Posts(r *http.Request) bool {
	return r.Method == http.MethodPost && strings.HasPrefix(r.URL.Path, "/sheet/results/")
}

// route is one path of the handler.
type route struct {
	// path is what stands after /sheet/: words, {} for a name, and .* at its end for a table's format.
	path   string
	method string
	// cell marks a one-cell read.
	cell   bool
	params []string
	serve  func(*Handler, *request) (*answer, error)
}

var (
	tableParams = []string{"decimal", "delimiter"}
	blockParams = []string{"values", "lot", "decimal", "delimiter", "header", "sheet", "header_row", "inspected", "material", "refusals"}
	trackParams = []string{"lot", "decimal"}
)

var routes = []route{
	{"limit/{}/{}", http.MethodGet, true, with(trackParams, "version", "unit", "material"), (*Handler).limit},
	{"verdict/{}", http.MethodGet, true, with(trackParams, "version", "value", "values", "alone", "inspected", "material"), (*Handler).verdict},
	{"state/{}", http.MethodGet, true, trackParams, (*Handler).state},
	{"signals/{}", http.MethodGet, true, trackParams, (*Handler).signalCount},
	{"batch", http.MethodGet, false, with(tableParams, "keys", "lot"), (*Handler).batch},
	{"batch", http.MethodPost, false, with(tableParams, "lot"), (*Handler).batch},
	{"limits.*", http.MethodGet, false, with(tableParams, "label"), (*Handler).limitsTable},
	{"results/{}.*", http.MethodGet, false, with(tableParams, "lot", "from", "to"), (*Handler).resultsTable},
	{"verdicts/{}.*", http.MethodGet, false, with(tableParams, "lot", "from", "to"), (*Handler).verdictsTable},
	{"signals.*", http.MethodGet, false, with(tableParams, "chart", "label", "status", "lot"), (*Handler).signalsTable},
	{"workbook/{}.*", http.MethodGet, false, []string{"lot", "from", "to"}, (*Handler).workbook},
	{kitPath, http.MethodGet, false, nil, (*Handler).kit},
	{kitPath + "/{}", http.MethodGet, false, nil, (*Handler).kit},
	{"judge/{}", http.MethodPost, false, with(blockParams, "alone"), (*Handler).judge},
	{"results/{}", http.MethodPost, false, with(blockParams, "id", "time", "source", "dates", "zone", "all_or_nothing", "preview"), (*Handler).post},
}

func (rt *route) takes(param string) bool { return slices.Contains(rt.params, param) }

func with(list []string, more ...string) []string { return append(more, list...) }

// match takes a path apart; args are the names in it, the format last where it has one.
func (rt *route) match(path string) (args []string, ok bool) {
	want, formatted := strings.CutSuffix(rt.path, ".*")
	format := ""
	if formatted {
		at := strings.LastIndexByte(path, '.')
		if at < 0 {
			return nil, false
		}
		path, format = path[:at], path[at+1:]
	}
	parts := strings.Split(path, "/")
	for i, w := range strings.Split(want, "/") {
		switch {
		case i >= len(parts), w != "{}" && w != parts[i], parts[i] == "":
			return nil, false
		case w == "{}":
			args = append(args, parts[i])
		}
	}
	if formatted {
		args = append(args, format)
	}
	return args, len(parts) == strings.Count(want, "/")+1
}
