package sheet

import (
	"context"
	"fmt"
	"io"
	"net/http"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/grid"
)

// batch answers many keys at once.
func (h *Handler) batch(r *request) (*answer, error) {
	text := r.query.Get("keys")
	if r.http.Method == http.MethodPost {
		body, err := io.ReadAll(r.http.Body)
		if err != nil {
			return nil, refuse("the body could not be read")
		}
		text = strings.TrimPrefix(string(body), "\ufeff")
	}
	keys := strings.FieldsFunc(text, func(c rune) bool { return strings.ContainsRune(", ;\t\r\n", c) })
	switch {
	case len(keys) == 0:
		return nil, refuse("there are no keys; give keys=CHART/NAME,CHART/NAME, or POST them one a line")
	case len(keys) > KeysMax:
		return nil, refuse("%d keys, the limit is %d", len(keys), KeysMax)
	}
	b := batch{h: h, lot: r.query.Get("lot"), versions: map[string]versionOrWhy{}, tracks: map[string]trackOrWhy{}}
	t := &grid.Table{Name: "Values", Columns: []string{"key", "value", "version", "note"}}
	for _, key := range keys {
		row, err := b.row(r.ctx(), key)
		if err != nil {
			return nil, err
		}
		t.Rows = append(t.Rows, row)
	}
	return h.tables(r, "csv", "values", t)
}

// batch remembers what was read of each chart, so that all its keys are answered from the same version.
type batch struct {
	h        *Handler
	lot      string
	versions map[string]versionOrWhy
	tracks   map[string]trackOrWhy
}

// versionOrWhy and trackOrWhy hold what was read, or why it is not known.
type versionOrWhy struct {
	version *pb.Version
	why     string
}

type trackOrWhy struct {
	state string
	open  int64
	why   string
}

// row answers one key. Only a fault is an error.
func (b *batch) row(ctx context.Context, key string) ([]grid.Value, error) {
	marked := func(why string) []grid.Value {
		return []grid.Value{grid.Of(redact(key)), {}, {}, grid.Of("refused: " + redact(why))}
	}
	chart, name, ok := strings.Cut(key, "/")
	switch {
	case !ok:
		return marked("want CHART/NAME"), nil
	case name == "state" || name == "signals":
		t, err := b.track(ctx, chart)
		if err != nil || t.why != "" {
			return marked(t.why), err
		}
		value := grid.Of(t.state)
		if name == "signals" {
			value = grid.Int(t.open)
		}
		return []grid.Value{grid.Of(key), value, {}, {}}, nil
	}
	v, err := b.version(ctx, chart)
	if err != nil || v.why != "" {
		return marked(v.why), err
	}
	value, err := valueOf(v.version, name)
	if err != nil {
		return marked(err.Error()), nil
	}
	return []grid.Value{grid.Of(key), value, grid.Int(v.version.Number), {}}, nil
}

func (b *batch) version(ctx context.Context, chart string) (versionOrWhy, error) {
	if known, ok := b.versions[chart]; ok {
		return known, nil
	}
	v, err := b.h.version(ctx, chart, b.lot, 0)
	why, err := whyNot(err)
	if err == nil {
		b.versions[chart] = versionOrWhy{v, why}
	}
	return versionOrWhy{v, why}, err
}

func (b *batch) track(ctx context.Context, chart string) (trackOrWhy, error) {
	if known, ok := b.tracks[chart]; ok {
		return known, nil
	}
	s, err := b.h.stands(ctx, chart, b.lot)
	why, err := whyNot(err)
	out := trackOrWhy{stateWord(s.state), s.open, why}
	if err == nil {
		b.tracks[chart] = out
	}
	return out, err
}

// whyNot tells what can be expected to go wrong from a fault.
func whyNot(err error) (why string, fault error) {
	if err == nil {
		return "", nil
	}
	if _, text, expected := explain(err); expected {
		return text, nil
	}
	return "", fmt.Errorf("batch: %w", err)
}
