package sheet

import (
	"context"
	"net/http"
	"net/url"
	"slices"
	"strconv"
	"strings"

	"google.golang.org/grpc/status"

	"limitary/internal/sheet/block"
)

// request is one request, taken apart.
type request struct {
	http *http.Request
	// args are the names in the path, the format of a table last.
	args  []string
	query url.Values
	// workbooks is the handler's room for workbooks.
	workbooks chan struct{}
}

// withWorkbook does what takes much memory for a moment, when there is room.
func (r *request) withWorkbook(do func() error) error {
	select {
	case r.workbooks <- struct{}{}:
		defer func() { <-r.workbooks }()
		return do()
	case <-r.ctx().Done():
		return status.FromContextError(r.ctx().Err()).Err()
	}
}

func (r *request) ctx() context.Context { return r.http.Context() }

// chart is the chart in the path.
func (r *request) chart() string { return r.args[0] }

// parseQuery reads a query as spreadsheets write it: a semicolon and a plus sign stand for themselves.
func parseQuery(raw string, known []string) (url.Values, error) {
	out := url.Values{}
	for part := range strings.SplitSeq(raw, "&") {
		if part == "" {
			continue
		}
		name, value, _ := strings.Cut(part, "=")
		name, err1 := url.PathUnescape(name)
		value, err2 := url.PathUnescape(value)
		if err1 != nil || err2 != nil {
			return nil, refuse("the address cannot be read; percent-encode %% and & in it")
		}
		if !slices.Contains(known, name) {
			return nil, refuse("%s: is no parameter here; there are %s", clip(name), strings.Join(known, ", "))
		}
		if name != "label" && out.Has(name) {
			return nil, refuse("%s: is given twice", name)
		}
		out.Add(name, value)
	}
	return out, nil
}

// version is the pinned version, 0 where there is none.
func (r *request) version() (int32, error) {
	text := r.query.Get("version")
	if text == "" {
		return 0, nil
	}
	n, err := strconv.ParseInt(text, 10, 32)
	if err != nil || n < 1 {
		return 0, refuse("version=%s: want a version's number", clip(text))
	}
	return int32(n), nil
}

// flag reads a parameter that is 1 or 0.
func (r *request) flag(name string, otherwise bool) (bool, error) {
	switch text := r.query.Get(name); text {
	case "":
		return otherwise, nil
	case "1", "yes", "true":
		return true, nil
	case "0", "no", "false":
		return false, nil
	default:
		return false, refuse("%s=%s: want 1 or 0", name, clip(text))
	}
}

// decimal is the decimal of numbers in the answer and, where the caller says so, in the question: 0 where it does not.
func (r *request) decimal() (byte, error) {
	d, err := block.ParseDecimal(r.query.Get("decimal"))
	return d, asRefusal(err)
}

// labels are filters written key:value or key=value, in the API's form.
func (r *request) labels() ([]string, error) {
	var out []string
	for _, text := range r.query["label"] {
		at := strings.IndexAny(text, ":=")
		if at < 1 {
			return nil, refuse("label=%s: want a label as key:value, such as site:harwick", clip(text))
		}
		out = append(out, text[:at]+"="+text[at+1:])
	}
	return out, nil
}

// dialect is that of a table in the answer.
func (r *request) dialect(format string) (block.Dialect, error) {
	decimal, err := r.decimal()
	if err != nil {
		return block.Dialect{}, err
	}
	delimiter, err := block.ParseDelimiter(r.query.Get("delimiter"))
	switch {
	case err != nil:
		return block.Dialect{}, asRefusal(err)
	case delimiter == block.None:
		return block.Dialect{}, refuse("delimiter=none: a table has several columns; want tab, comma or semicolon")
	case delimiter != 0:
	case format == "tsv":
		delimiter = block.Tab
	case decimal == ',':
		delimiter = block.Semicolon
	default:
		delimiter = block.Comma
	}
	if decimal == 0 {
		decimal = '.'
	}
	return block.Dialect{Delimiter: delimiter, Decimal: decimal, CRLF: true}, nil
}

// checkAddress refuses an address that some programs would cut off.
func checkAddress(r *http.Request) error {
	if n := len("https://") + len(r.Host) + len(r.RequestURI); r.Method != http.MethodPost && n > AddressCharsMax {
		return refuse("the address has %d characters, the limit is %d; send fewer values, or POST them", n, AddressCharsMax)
	}
	return nil
}
