package sheet

import (
	"fmt"
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
}

// resultColumns are where the parts of a result stand; -1 for none.
type resultColumns struct {
	id, time, source int
	more             map[string]int
}

// moreFields are the columns taken by their own name.
var moreFields = []string{"lot", "run_id", "position", "replicate", "role", "repeat_of", "unit", "analyst", "instrument"}

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
	for i, row := range p.Rows {
		if row.Blank() {
			continue
		}
		if b.results[i], b.trouble[i] = b.result(row, r, clock); b.trouble[i] != nil {
			b.results[i] = nil
			b.troubles = append(b.troubles, b.trouble[i])
		}
	}
	return b, nil
}

func (r *request) clock() (c block.Clock, err error) {
	if c.Dates, err = block.ParseDates(r.query.Get("dates")); err != nil {
		return c, asRefusal(err)
	}
	c.Zone, err = block.ParseZone(r.query.Get("zone"))
	return c, asRefusal(err)
}

func (r *request) resultColumns(p *pasted) (c resultColumns, err error) {
	c.more = map[string]int{}
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
	for _, name := range moreFields {
		c.more[name] = p.Index(name)
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
	more := func(name string) string { return at(b.columns.more[name]) }
	out := &pb.Result{Chart: b.chart, SourceId: at(b.columns.id), Source: at(b.columns.source), Lot: more("lot"), RunId: more("run_id"),
		RepeatOf: more("repeat_of"), Unit: more("unit"), Material: b.materialOf(row), Analyst: more("analyst"), Instrument: more("instrument")}
	if out.SourceId == "" {
		return nil, &trouble{row.Number, b.Names[b.columns.id], "is empty; every result needs its own id"}
	}
	if b.columns.source < 0 {
		out.Source = r.query.Get("source")
	}
	if b.columns.more["lot"] < 0 {
		out.Lot = r.query.Get("lot")
	}
	measured, err := clock.Read(at(b.columns.time), b.Dialect.Decimal)
	if err != nil {
		return nil, &trouble{row.Number, b.Names[b.columns.time], err.Error()}
	}
	out.MeasuredAt = measured
	if bad := b.measured(row, out); bad != nil {
		return nil, bad
	}
	return out, b.whole(row.Number, out, more)
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
func (b *rows) whole(row int, out *pb.Result, more func(string) string) *trouble {
	for name, to := range map[string]*int32{"position": &out.Position, "replicate": &out.Replicate} {
		text := more(name)
		if text == "" {
			continue
		}
		n, err := strconv.ParseInt(text, 10, 32)
		if err != nil || n < 0 {
			return &trouble{row, name, fmt.Sprintf("%q: want a whole number of at least 0", clip(text))}
		}
		*to = int32(n)
	}
	if text := more("role"); text != "" {
		role, ok := pb.ResultRole_value["RESULT_ROLE_"+strings.ToUpper(text)]
		if !ok || role == 0 {
			return &trouble{row, "role", fmt.Sprintf("%q: want ROUTINE, REPEAT, OVERLAP or SETUP", clip(text))}
		}
		out.Role = pb.ResultRole(role)
	}
	return nil
}
