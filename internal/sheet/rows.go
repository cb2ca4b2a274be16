package sheet

import (
	"fmt"
	"net/http"
	"slices"
	"strconv"
	"strings"

	pb "limitary/api/limitary/v1"
	"limitary/internal/sheet/block"
)

// rows is a pasted block on its way to the service.
type rows struct {
	*pasted
	columns resultColumns
	chart   string
	// results and troubles are by the row's index in the block; one of them is nil, both where the row is blank.
	results  []*pb.Result
	trouble  []*trouble
	troubles []*trouble
	posted   []*pb.PostedResult
	// all are the results as they were read, also of rows that are refused later; first is the first row of each row's id.
	all   []*pb.Result
	first []int
}

// resultColumns are where the parts of a result stand; -1 for none.
type resultColumns struct {
	id, time, source int
}

func (r *request) batchOfResults() (*rows, error) {
	p, err := r.paste()
	if err != nil {
		return nil, err
	}
	clock, err := r.clock()
	if err != nil {
		return nil, err
	}
	b := &rows{pasted: p, chart: r.chart(), results: make([]*pb.Result, len(p.Rows)), trouble: make([]*trouble, len(p.Rows)), posted: make([]*pb.PostedResult, len(p.Rows))}
	if b.columns, err = r.resultColumns(p); err != nil {
		return nil, err
	}
	numbers := p.numbers()
	if strings.HasPrefix(string(clock.Dates), "serial") {
		numbers = append(numbers, b.columns.time)
	}
	if err := p.settle(numbers...); err != nil {
		return nil, err
	}
	if !slices.ContainsFunc(p.Rows, func(row block.Row) bool { return !row.Blank() }) {
		return nil, &refusal{status: http.StatusUnprocessableEntity, text: "nothing stored: every row is blank"}
	}
	for i, row := range p.Rows {
		if row.Blank() {
			continue
		}
		if b.results[i], b.trouble[i] = b.result(row, r, clock); b.trouble[i] != nil {
			b.results[i] = nil
			b.troubles = append(b.troubles, b.trouble[i])
		}
	}
	b.findFirst()
	return b, nil
}

// findFirst finds the first row of each id.
func (b *rows) findFirst() {
	b.all, b.first = slices.Clone(b.results), make([]int, len(b.results))
	seen := map[string]int{}
	for i, r := range b.results {
		b.first[i] = i
		if r == nil {
			continue
		}
		key := r.Source + "\x00" + r.SourceId
		if first, twice := seen[key]; twice {
			b.first[i] = first
		} else {
			seen[key] = i
		}
	}
}

func (r *request) clock() (c block.Clock, err error) {
	if c.Dates, err = block.ParseDates(r.query.Get("dates")); err != nil {
		return c, asRefusal(err)
	}
	c.Zone, err = block.ParseZone(r.query.Get("zone"))
	return c, asRefusal(err)
}

func (r *request) resultColumns(p *pasted) (c resultColumns, err error) {
	if c.id, err = p.column("id", r.query.Get("id"), "id", "source_id"); err != nil {
		return c, err
	}
	if c.time, err = p.column("time", r.query.Get("time"), "time", "measured_at"); err != nil {
		return c, err
	}
	c.source = p.Index("source")
	switch {
	case c.id < 0:
		return c, refuse("no column holds the ids, by which posting again is safe; say id=, one of %s", p.list())
	case c.time < 0:
		return c, refuse("no column holds the times; say time=, one of %s", p.list())
	case c.source < 0 && r.query.Get("source") == "":
		return c, refuse("where do the results come from? say source=, such as source=bench-harwick, always the same for the same sheet")
	case c.source >= 0 && r.query.Get("source") != "":
		return c, refuse("source=%s: is given, and so is a column source; give one of them", clip(r.query.Get("source")))
	}
	return c, nil
}

// result makes a result of a row.
func (b *rows) result(row block.Row, r *request, clock block.Clock) (*pb.Result, *trouble) {
	at := func(column int) string {
		if column < 0 {
			return ""
		}
		return strings.TrimSpace(row.Cells[column])
	}
	if bad := b.contradicts(row); bad != nil {
		return nil, bad
	}
	if voided, bad := b.isVoided(row); voided || bad != nil {
		if bad == nil {
			bad = &trouble{row.Number, "voided", "says that the result is voided; it is not posted again, take the row out"}
		}
		return nil, bad
	}
	more := func(name string) string { return b.field(row, name) }
	out := &pb.Result{Chart: b.chart, SourceId: at(b.columns.id), Source: at(b.columns.source), Lot: b.orGiven(row, "lot"), RunId: more("run_id"),
		RepeatOf: more("repeat_of"), Unit: more("unit"), Material: b.orGiven(row, "material"), Analyst: more("analyst"), Instrument: more("instrument")}
	if out.SourceId == "" {
		return nil, &trouble{row.Number, b.Names[b.columns.id], "is empty; every result needs its own id"}
	}
	if b.columns.source < 0 {
		out.Source = r.query.Get("source")
	}
	measured, err := clock.Read(at(b.columns.time), b.Dialect.Decimal)
	if err != nil {
		return nil, &trouble{row.Number, b.Names[b.columns.time], err.Error()}
	}
	out.MeasuredAt = measured
	if bad := b.measured(row, out); bad != nil {
		return nil, bad
	}
	return out, b.whole(row, out)
}

// measured reads the readings, or the count, of a row.
func (b *rows) measured(row block.Row, out *pb.Result) *trouble {
	readings, bad := b.readings(row)
	if bad != nil {
		return bad
	}
	if len(readings) == 0 {
		return &trouble{row.Number, b.Names[b.values[0]], "is empty; a result needs a reading"}
	}
	inspected, bad := b.inspectedOf(row)
	if bad != nil || inspected == "" {
		out.Readings = readings
		return bad
	}
	count, err := countOf(readings, inspected)
	if err != nil {
		return &trouble{row.Number, b.Names[b.values[0]], err.Error()}
	}
	out.Count = count
	return nil
}

// whole reads the fields that are not text.
func (b *rows) whole(row block.Row, out *pb.Result) (bad *trouble) {
	for name, to := range map[string]*int32{"position": &out.Position, "replicate": &out.Replicate} {
		text := b.field(row, name)
		if text == "" {
			continue
		}
		n, err := strconv.ParseInt(text, 10, 32)
		if err != nil || n < 0 {
			return &trouble{row.Number, name, fmt.Sprintf("%q: want a whole number of at least 0", clip(text))}
		}
		*to = int32(n)
	}
	out.Role, bad = b.role(row)
	return bad
}

const rolePrefix = "RESULT_ROLE_"

// role reads what a row was measured for; unspecified where it does not say.
func (p *pasted) role(row block.Row) (pb.ResultRole, *trouble) {
	text := p.field(row, "role")
	if text == "" {
		return 0, nil
	}
	role := pb.ResultRole_value[rolePrefix+strings.ToUpper(text)]
	if role == 0 {
		return 0, &trouble{row.Number, "role", fmt.Sprintf("%q: want ROUTINE, REPEAT, OVERLAP or SETUP", clip(text))}
	}
	return pb.ResultRole(role), nil
}
