package sheet

import (
	"context"
	"fmt"
	"regexp"
	"slices"
	"strconv"

	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/block"
	"limitary/internal/sheet/book"
	"limitary/internal/sheet/grid"
)

// added begins the names of the columns that an answer adds to a block. Columns with such names are not read again, so that an
// answer can be sent as it came.
const added = "limitary_"

func addedColumns(names ...string) []string {
	out := make([]string, len(names))
	for i, n := range names {
		out[i] = added + n
	}
	return out
}

var judgedColumns = addedColumns("standing", "rules", "version", "note")

// judge gives a pasted block back with a verdict for each row, and stores nothing.
func (h *Handler) judge(r *request) (*answer, error) {
	t := trial{chart: r.chart(), lot: r.query.Get("lot")}
	var err error
	if t.alone, err = r.flag("alone", false); err != nil {
		return nil, err
	}
	p, err := r.paste()
	if err != nil {
		return nil, err
	}
	if err := p.settle(p.numbers()...); err != nil {
		return nil, err
	}
	if err := h.checkUnits(r.ctx(), p); err != nil {
		return nil, err
	}
	var places []int // the rows of the points
	notes := make([]string, len(p.Rows))
	for i, row := range p.Rows {
		note, left, bad := p.standsAs(row)
		if bad != nil {
			return nil, refuse("%s", bad)
		}
		if notes[i] = note; left {
			continue
		}
		point, bad := p.point(row)
		if bad != nil {
			return nil, refuse("%s", bad)
		}
		t.points, places = append(t.points, point), append(places, i)
	}
	j, err := h.try(r.ctx(), t)
	if err != nil {
		return nil, p.named(err, places)
	}
	more := make([][]string, len(p.Rows))
	for i, note := range notes {
		more[i] = []string{"NOT_JUDGED", "", "", "not recorded; " + note}
	}
	after := "not recorded; " + j.afterText(t.alone)
	for k, v := range j.result.Verdicts {
		note := after
		if text := notes[places[k]]; text != "" {
			note += "; " + text
		}
		more[places[k]] = []string{standingWord(v.Standing, v.Reason), rulesHit(v), j.version(), note}
	}
	p.sayUnread(more, p.Index("id"), p.Index("source_id"), p.Index("time"), p.Index("measured_at"), p.Index("source"))
	return p.answer(judgedColumns, more)
}

// standsAs says what a row is other than an ordinary point; one that is left is no point at all.
func (p *pasted) standsAs(row block.Row) (note string, left bool, bad *trouble) {
	if bad = p.contradicts(row); bad != nil {
		return "", false, bad
	}
	role, bad := p.role(row)
	if bad != nil {
		return "", false, bad
	}
	voided, bad := p.isVoided(row)
	switch {
	case bad != nil:
		return "", false, bad
	case voided:
		return "the row is voided and no point", true, nil
	case role == pb.ResultRole_RESULT_ROLE_REPEAT:
		return "a REPEAT is no point", true, nil
	case role == pb.ResultRole_RESULT_ROLE_UNSPECIFIED, role == pb.ResultRole_RESULT_ROLE_ROUTINE:
		return "", false, nil
	}
	return "role " + word(role.String(), rolePrefix) + ", judged as any point", false, nil
}

// checkUnits refuses rows in another unit than the chart's.
func (h *Handler) checkUnits(ctx context.Context, p *pasted) error {
	at := slices.IndexFunc(p.Rows, func(row block.Row) bool { return p.field(row, "unit") != "" })
	if at < 0 {
		return nil
	}
	got, err := h.charts.GetChart(ctx, &pb.GetChartRequest{Name: p.request.chart()})
	if err != nil {
		return err
	}
	for _, row := range p.Rows[at:] {
		if unit := p.field(row, "unit"); unit != "" && unit != got.Chart.Unit {
			return refuse("%s", &trouble{row.Number, "unit", fmt.Sprintf("%q: chart %q is in %q", clip(unit), got.Chart.Name, got.Chart.Unit)})
		}
	}
	return nil
}

// pointInError finds the point that the service refuses.
var pointInError = regexp.MustCompile(`^evaluations\[[0-9]+\]\.points\.points\[([0-9]+)\]`)

// named puts the row before what the service says of a point.
func (p *pasted) named(err error, places []int) error {
	m := pointInError.FindStringSubmatch(status.Convert(err).Message())
	if m == nil {
		return err
	}
	_, text, _ := explain(err)
	i, _ := strconv.Atoi(m[1])
	return refuse("%s", &trouble{p.Rows[places[i]].Number, p.Names[p.values[0]], text})
}

// point makes a point of a row; a row without a reading is a point without a value.
func (p *pasted) point(row block.Row) (*pb.Point, *trouble) {
	texts, bad := p.readings(row)
	if bad != nil || len(texts) == 0 {
		return &pb.Point{}, bad
	}
	inspected, bad := p.inspectedOf(row)
	if bad != nil {
		return nil, bad
	}
	point, err := pointOf(texts, inspected, p.orGiven(row, "material"))
	if err != nil {
		return nil, &trouble{row.Number, p.Names[p.values[0]], err.Error()}
	}
	return point, nil
}

// answer gives the block back with more columns: text in its own dialect, a workbook as a workbook.
func (p *pasted) answer(names []string, more [][]string) (*answer, error) {
	if !p.workbook {
		contentType := "text/csv; charset=utf-8"
		if p.Dialect.Delimiter == block.Tab || p.Dialect.Delimiter == block.None {
			contentType = "text/tab-separated-values; charset=utf-8"
		}
		return &answer{contentType: contentType, body: p.Extend(names, more)}, nil
	}
	t := &grid.Table{Name: "Results", Columns: append(append([]string{}, p.Names...), names...)}
	for i, row := range p.Rows {
		var cells []grid.Value
		for _, text := range append(append([]string{}, row.Cells...), more[i]...) {
			cells = append(cells, echoed(text))
		}
		t.Rows = append(t.Rows, cells)
	}
	data, err := p.request.workbook([]*grid.Table{t})
	return &answer{contentType: book.ContentType, body: data, filename: "results.xlsx"}, err
}

// typed makes a number of a reading, or a text of a bound.
func typed(text string) grid.Value {
	if block.IsNumber(text) {
		return grid.Value{Kind: grid.Number, Text: text}
	}
	return grid.Of(text)
}

// ordinary is a number as anyone writes one. An id such as 007 is none.
var ordinary = regexp.MustCompile(`^-?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?$`)

// echoed makes a number of a cell of which nothing else is known.
func echoed(text string) grid.Value {
	if ordinary.MatchString(text) {
		return grid.Value{Kind: grid.Number, Text: text}
	}
	return grid.Of(text)
}
