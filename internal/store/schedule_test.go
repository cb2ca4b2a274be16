package store_test

import (
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/pgtest"
	"limitary/internal/rules"
	"limitary/internal/store"
)

// schedules is how many random schedules the suite runs; each is run once in order by one writer and once by eight
// writers over two services, and both must end in the same state.
const schedules = 200

var epoch = time.Date(2025, 3, 1, 8, 0, 0, 0, time.UTC)

// world is one schedule: what happens to a chart, whatever the order.
type world struct {
	seed uint64
	lots bool
	// kind is individuals, or p; standardised tells that readings are judged by the level of their material.
	kind         chart.Kind
	standardised bool
	results      []definition.Result
	// versions to approve, by index; withdrawn ones are withdrawn right after.
	versions []definition.Content
	withdraw map[int]bool
	amend    map[int]definition.Result
	void     []int
	marks    []store.Mark
	voidMark map[int]bool
	shuffled []int
}

func newWorld(seed uint64) *world {
	r := rand.New(rand.NewPCG(seed, 77))
	w := &world{seed: seed, kind: chart.Individuals, standardised: seed%6 == 4, lots: r.IntN(3) == 0, withdraw: map[int]bool{}, amend: map[int]definition.Result{}, voidMark: map[int]bool{}}
	if seed%6 == 5 {
		w.kind = chart.P
	}
	n := 20 + r.IntN(40)
	for i := range n {
		w.results = append(w.results, w.result(r, i))
	}
	for i := range 1 + r.IntN(3) {
		w.versions = append(w.versions, w.version(r, i, n))
		w.withdraw[i] = i > 0 && r.IntN(4) == 0
	}
	for range r.IntN(5) {
		i := r.IntN(n)
		changed := w.result(r, r.IntN(n))
		changed.SourceID = w.results[i].SourceID
		w.amend[i] = changed
	}
	for range r.IntN(4) {
		if i := r.IntN(n); w.amend[i].SourceID == "" && !slices.Contains(w.void, i) {
			w.void = append(w.void, i)
		}
	}
	for i := range r.IntN(3) {
		w.marks = append(w.marks, store.Mark{At: epoch.Add(time.Duration(r.IntN(n)) * time.Hour), Text: fmt.Sprint("mark ", i), Break: true, Restart: r.IntN(2) == 0})
		w.voidMark[i] = r.IntN(3) == 0
	}
	return w
}

// result draws values from a coarse grid, so that ties on lines are common.
func (w *world) result(r *rand.Rand, i int) definition.Result {
	value := 10 + float64(r.IntN(9)-4)*0.5 + float64(r.IntN(12)/11)*3
	at := epoch.Add(time.Duration(i) * time.Hour)
	if r.IntN(8) == 0 {
		at = epoch.Add(time.Duration(i/4*4) * time.Hour)
	}
	res := definition.Result{Source: "lims", SourceID: fmt.Sprintf("s%03d", i), MeasuredAt: at, MeasuredText: at.Format(time.RFC3339), Role: definition.Routine,
		Readings: []string{fmt.Sprintf("%.1f", value)}, Unit: "mg/L", RunID: fmt.Sprint("run", i/5)}
	switch r.IntN(15) {
	case 0:
		res.Role, res.RepeatOf = definition.Repeat, "s000"
	case 1:
		res.Readings[0] = "<" + res.Readings[0]
	case 2:
		res.Readings[0] = ">" + res.Readings[0]
	}
	switch {
	case w.kind == chart.P:
		res.Readings, res.Count = nil, &chart.Count{Nonconforming: max(0, math.Round(value*2-15)), Inspected: []float64{50, 100}[r.IntN(2)]}
	case w.standardised:
		res.Material = []string{"low", "low", "high", "other"}[r.IntN(4)]
	}
	if w.lots {
		res.Lot = []string{"A", "B"}[r.IntN(2)]
	}
	return res
}

func (w *world) version(r *rand.Rand, i, n int) definition.Content {
	centre, sigma := 10.0, []float64{0.5, 1, 1}[r.IntN(3)]
	loc := &definition.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, RuleSet: "", Rules: []rules.Spec{
		{ID: "a", Kind: rules.BeyondLine, Line: rules.ActionLine, Consequence: rules.Stop},
		{ID: "b", Kind: rules.SameSide, N: 3 + r.IntN(4), Consequence: rules.Act},
		{ID: "c", Kind: rules.Beyond, K: 2, M: 3, Z: 1, Consequence: rules.Act},
		{ID: "d", Kind: rules.Trend, N: 3, Consequence: rules.Look},
		{ID: "e", Kind: rules.CUSUM, Reference: 0.5, Interval: 2, HeadStart: float64(r.IntN(2)), Consequence: rules.Act},
		{ID: "f", Kind: rules.EWMA, Lambda: 0.4, Limit: 1.5, Consequence: rules.Look},
	}}
	moving, spread := 1.128*sigma, 0.853*sigma
	disp := &definition.Trace{Trace: chart.Trace{Centre: &moving, Sigma: &spread, LowerAction: chart.Line{Basis: chart.Absent}, LowerWarning: chart.Line{Basis: chart.Absent}},
		Rules: []rules.Spec{{ID: "m", Kind: rules.BeyondLine, Line: rules.ActionLine, Consequence: rules.Act}}}
	from := epoch.Add(time.Duration(i*n/3+r.IntN(5)-2) * time.Hour)
	if i == 0 {
		from = epoch.Add(time.Duration(r.IntN(6)-3) * time.Hour)
	}
	if w.kind == chart.P {
		return w.counted(r, from)
	}
	var model *chart.Model
	if w.standardised {
		model = &chart.Model{Levels: []chart.Level{{Material: "low", Reference: 0, Sigma: 1}, {Material: "high", Reference: -5, Sigma: 1.5}}}
	}
	return definition.Content{Model: model, Kind: chart.Individuals, SubgroupSize: 1, Unit: "mg/L", Decimals: 2, ProcessSigma: sigma, Location: loc, Dispersion: disp,
		Reason: "set-up", EffectiveFrom: from, Judge: rules.JudgeNumber, Basis: "test"}
}

// counted is a version of a p chart whose lines are each sample's own; rules that look for patterns are used on purpose.
func (w *world) counted(r *rand.Rand, from time.Time) definition.Content {
	centre := []float64{0.08, 0.1}[r.IntN(2)]
	sigma := math.Sqrt(centre * (1 - centre) / 100)
	method := chart.Exact
	if r.IntN(2) == 0 {
		method = chart.Normal
	}
	return definition.Content{Kind: chart.P, SubgroupSize: 1, Unit: "mg/L", Decimals: 4, Reason: "set-up", EffectiveFrom: from, Judge: rules.JudgeNumber, Basis: "test",
		Model: &chart.Model{CountMethod: method, Inspected: 100},
		Location: &definition.Trace{Trace: chart.Trace{Centre: &centre, Sigma: &sigma}, Rules: []rules.Spec{
			{ID: "a", Kind: rules.Beyond, K: 1, M: 1, Z: 3, Consequence: rules.Stop},
			{ID: "b", Kind: rules.Beyond, K: 2, M: 3, Z: 1, Consequence: rules.Act},
			{ID: "c", Kind: rules.Trend, N: 3, Consequence: rules.Look},
			{ID: "d", Kind: rules.EWMA, Lambda: 0.4, Limit: 1.5, Consequence: rules.Look},
		}}}
}

// site runs schedules against one database.
type site struct {
	t        *testing.T
	stores   []*store.Store
	author   store.Actor
	approver store.Actor
	poster   store.Actor
}

func newSite(t *testing.T, db *pgtest.Database) *site {
	s := &site{t: t}
	for range 2 {
		st, err := store.Open(t.Context(), db.ServiceURL(), store.Options{})
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(st.Close)
		s.stores = append(s.stores, st)
	}
	actor := func(name string) store.Actor {
		k := definition.Key{ID: fmt.Sprintf("%016x", sha256.Sum256([]byte(name)))[:16], Principal: name, Roles: definition.Permissions, ExpiresAt: time.Now().Add(time.Hour)}
		hash := sha256.Sum256([]byte(name))
		made, _, err := s.stores[0].CreateKey(t.Context(), store.Actor{Principal: name, Key: k}, request("key", name), k, hash[:])
		if err != nil {
			t.Fatal(err)
		}
		return store.Actor{Principal: name, Key: made}
	}
	s.author, s.approver, s.poster = actor("author"), actor("approver"), actor("poster")
	return s
}

func request(parts ...any) store.Request {
	id := fmt.Sprint(parts...)
	digest := sha256.Sum256([]byte(id))
	return store.Request{ID: id, Method: fmt.Sprint(parts[0]), Digest: digest[:]}
}

// op is one thing a writer does; it may be done before or after any other.
type op struct {
	name string
	do   func(ctx context.Context, s *store.Store) error
}

// ops lists what happens in a world on a chart of a name. Done in any order, also twice, they end in one state.
func (s *site) ops(w *world, name string) []op {
	var list []op
	r := rand.New(rand.NewPCG(w.seed, 5))
	add := func(name string, do func(context.Context, *store.Store) error) { list = append(list, op{name, do}) }
	post := func(ctx context.Context, st *store.Store, indices []int) error {
		return s.post(ctx, st, w, name, indices)
	}
	for i := 0; i < len(w.results); {
		n := 1 + r.IntN(5)
		var batch []int
		for ; n > 0 && i < len(w.results); n, i = n-1, i+1 {
			batch = append(batch, i)
		}
		if r.IntN(3) == 0 {
			batch = append(batch, r.IntN(len(w.results)), batch[0])
			r.Shuffle(len(batch), func(a, b int) { batch[a], batch[b] = batch[b], batch[a] })
		}
		add(fmt.Sprint("post ", batch), func(ctx context.Context, st *store.Store) error { return post(ctx, st, batch) })
	}
	for i, changed := range w.amend {
		add(fmt.Sprint("amend ", i), func(ctx context.Context, st *store.Store) error {
			if err := post(ctx, st, []int{i}); err != nil {
				return err
			}
			return s.amend(ctx, st, w, name, i, changed)
		})
	}
	for _, i := range w.void {
		add(fmt.Sprint("void ", i), func(ctx context.Context, st *store.Store) error {
			if err := post(ctx, st, []int{i}); err != nil {
				return err
			}
			ch, err := st.VoidResult(ctx, s.poster, request("void", name, i), name, "lims", w.results[i].SourceID, 1, "SPILT", "spilt")
			if err != nil {
				return err
			}
			return s.confirm(ctx, st, ch)
		})
	}
	for i := range w.versions {
		add(fmt.Sprint("approve ", i+1), func(ctx context.Context, st *store.Store) error { return s.approve(ctx, st, w, name, i) })
	}
	for i, m := range w.marks {
		add(fmt.Sprint("mark ", i), func(ctx context.Context, st *store.Store) error { return s.mark(ctx, st, w, name, i, m) })
	}
	slices.SortFunc(list, func(a, b op) int { return strings.Compare(a.name, b.name) })
	return list
}

func (s *site) post(ctx context.Context, st *store.Store, w *world, name string, indices []int) error {
	var rows []definition.Result
	for _, i := range indices {
		row := w.results[i]
		row.Chart = name
		rows = append(rows, row)
	}
	answer, err := st.PostResults(ctx, s.poster, rows, false, nil)
	if err != nil {
		return err
	}
	for i, row := range answer.Rows {
		if row.Outcome != store.Accepted && row.Outcome != store.Duplicate {
			return fmt.Errorf("row %s: outcome %d: %v", rows[i].SourceID, row.Outcome, row.Problem)
		}
	}
	// Other content under a key that is taken changes nothing.
	other := rows[0]
	other.Analyst = "someone else"
	answer, err = st.PostResults(ctx, s.poster, []definition.Result{other}, false, nil)
	if err == nil && answer.Rows[0].Outcome != store.Conflict {
		err = fmt.Errorf("other content of %s: outcome %d, want conflict", other.SourceID, answer.Rows[0].Outcome)
	}
	return err
}

func (s *site) amend(ctx context.Context, st *store.Store, w *world, name string, i int, changed definition.Result) error {
	changed.Chart = name
	if w.lots {
		// A correction does not open a lot.
		if _, err := st.StartLot(ctx, s.author, request("lot", name, changed.Lot, i), name, changed.Lot); err != nil && !isReason(err, definition.AlreadyExists) {
			return err
		}
	}
	_, ch, err := st.AmendResult(ctx, s.poster, request("amend", name, i), changed, 1, "TYPO", "typing error")
	if isReason(err, definition.NothingToDo) {
		return nil
	}
	if err != nil || ch == nil {
		return err
	}
	return s.confirm(ctx, st, ch)
}

// confirm confirms a change; where it has come to end more signals than when it was asked for, it looks at them first.
func (s *site) confirm(ctx context.Context, st *store.Store, ch *store.Change) error {
	return s.confirmAs(ctx, st, s.approver, ch)
}

func (s *site) confirmAs(ctx context.Context, st *store.Store, as store.Actor, ch *store.Change) error {
	var read []int64
	for {
		_, _, err := st.DecideChange(ctx, as, request("confirm", ch.ID), ch.ID, true, "seen", read)
		var refusal *definition.Error
		if !errors.As(err, &refusal) || refusal.Meta["signals"] == "" {
			return err
		}
		for _, text := range strings.Fields(refusal.Meta["signals"]) {
			id, err := strconv.ParseInt(text, 10, 64)
			if err != nil {
				return err
			}
			read = append(read, id)
		}
	}
}

func (s *site) approve(ctx context.Context, st *store.Store, w *world, name string, i int) error {
	for try := 0; ; try++ {
		v, patterns, _, err := st.GetVersion(ctx, s.approver, name, i+1)
		if err != nil {
			return err
		}
		var accepted []string
		for _, p := range patterns {
			accepted = append(accepted, p.Text())
		}
		_, _, err = st.ApproveVersion(ctx, s.approver, request("approve", name, i, "try", try), name, i+1, v.Digest, true, "retroactive on purpose", accepted)
		if isReason(err, definition.PatternsNotAccepted) {
			continue
		}
		if err != nil {
			return err
		}
		break
	}
	if !w.withdraw[i] {
		return nil
	}
	_, _, ch, err := st.WithdrawVersion(ctx, s.approver, request("withdraw", name, i), name, i+1, true, "wrong data")
	if err != nil || ch == nil {
		return err
	}
	return s.confirmAs(ctx, st, s.author, ch)
}

func (s *site) mark(ctx context.Context, st *store.Store, w *world, name string, i int, m store.Mark) error {
	m.Chart = name
	set, ch, err := st.AddMark(ctx, s.author, request("mark", name, i), m, "SERVICE", "column changed")
	if err != nil {
		return err
	}
	var id int64
	if set != nil {
		id = set.ID
	} else {
		if err := s.confirm(ctx, st, ch); err != nil {
			return err
		}
		if id, err = s.markID(ctx, st, name, m.Text); err != nil {
			return err
		}
	}
	if !w.voidMark[i] {
		return nil
	}
	_, ch, err = st.VoidMark(ctx, s.author, request("voidmark", name, i), name, id, "WRONG", "wrong chart")
	if err != nil || ch == nil {
		return err
	}
	return s.confirm(ctx, st, ch)
}

func (s *site) markID(ctx context.Context, st *store.Store, name, text string) (int64, error) {
	list, _, err := st.ListMarks(ctx, s.author, name, store.Page{}, true)
	for _, m := range list {
		if m.Text == text {
			return m.ID, err
		}
	}
	return 0, fmt.Errorf("no mark %q: %v", text, err)
}

func isReason(err error, reason definition.Reason) bool {
	var refusal *definition.Error
	return errors.As(err, &refusal) && refusal.Reason == reason
}

// found sets the chart up, with its versions proposed.
func (s *site) found(ctx context.Context, w *world, name string) error {
	st := s.stores[0]
	_, err := st.CreateChart(ctx, s.author, request("create", name), definition.Chart{Name: name, Kind: w.kind, SubgroupSize: 1, Unit: "mg/L", LotsAreTracks: w.lots, Standardised: w.standardised})
	for i := 0; err == nil && i < len(w.versions); i++ {
		content := w.versions[i]
		_, err = st.ProposeVersion(ctx, s.author, request("propose", name, i), name, func(number int, at time.Time) (definition.Content, error) {
			content.Chart, content.Number, content.Author, content.ProposedAt = name, number, s.author.Principal, at
			return content, nil
		})
	}
	return err
}

// TestStateDoesNotDependOnArrival runs random schedules of posts (late, twice, conflicting, batched), amendments, voids,
// marks, versions and lots, in order by one writer and in disorder by eight writers over two services, and compares the
// states they end in: place, version, verdict and hits of every result, episodes of every track. Then everything is
// rechecked.
func TestStateDoesNotDependOnArrival(t *testing.T) {
	db := pgtest.New(t)
	s := newSite(t, db)
	owner, err := pgx.Connect(t.Context(), db.OwnerURL())
	if err != nil {
		t.Fatal(err)
	}
	defer owner.Close(context.Background())
	for seed := range uint64(schedules) {
		if err := s.compare(t.Context(), owner, newWorld(seed)); err != nil {
			t.Errorf("seed %d: %v", seed, err)
			if t.Failed() && seed > 3 {
				break
			}
		}
	}
	report, err := s.stores[1].Recheck(t.Context(), nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range report.Differences {
		t.Error(d)
	}
	t.Logf("recheck: %d tracks, %d results, %d signals", report.Tracks, report.Results, report.Signals)
	if report.Results < schedules*20 || report.Signals == 0 {
		t.Errorf("recheck saw %d results and %d signals; too few for %d schedules", report.Results, report.Signals, schedules)
	}
}

func (s *site) compare(ctx context.Context, owner *pgx.Conn, w *world) error {
	ordered, racing := fmt.Sprintf("ordered-%d", w.seed), fmt.Sprintf("racing-%d", w.seed)
	for _, name := range []string{ordered, racing} {
		if err := s.found(ctx, w, name); err != nil {
			return err
		}
	}
	for _, o := range s.ops(w, ordered) {
		if err := o.do(ctx, s.stores[0]); err != nil {
			return fmt.Errorf("in order: %s: %w", o.name, err)
		}
	}
	if err := s.race(ctx, w, racing); err != nil {
		return err
	}
	want, err := dump(ctx, owner, ordered)
	if err != nil {
		return err
	}
	got, err := dump(ctx, owner, racing)
	if err != nil {
		return err
	}
	for i := range max(len(want), len(got)) {
		if i >= len(want) || i >= len(got) || want[i] != got[i] {
			at := func(list []string) string {
				if i < len(list) {
					return list[i]
				}
				return "nothing"
			}
			return fmt.Errorf("states differ:\nin order %s\nracing   %s", at(want), at(got))
		}
	}
	return nil
}

// race does the ops in a random order by eight writers, the last ones twice.
func (s *site) race(ctx context.Context, w *world, name string) error {
	ops := s.ops(w, name)
	r := rand.New(rand.NewPCG(w.seed, 9))
	r.Shuffle(len(ops), func(i, j int) { ops[i], ops[j] = ops[j], ops[i] })
	work := make(chan op, len(ops))
	for _, o := range ops {
		work <- o
	}
	close(work)
	errs := make(chan error, 8)
	var wg sync.WaitGroup
	for writer := range 8 {
		wg.Go(func() {
			for o := range work {
				if err := o.do(ctx, s.stores[writer%2]); err != nil {
					errs <- fmt.Errorf("racing: %s: %w", o.name, err)
					return
				}
			}
		})
	}
	wg.Wait()
	close(errs)
	return <-errs
}

// dump gives the state of a chart with natural keys in place of ids, in a fixed order.
func dump(ctx context.Context, q *pgx.Conn, name string) ([]string, error) {
	names := map[int64]string{0: "-"}
	rows, err := q.Query(ctx, `SELECT r.result_id, r.source_id FROM results r JOIN charts c USING (chart_id) WHERE c.name = $1`, name)
	if err != nil {
		return nil, err
	}
	var id int64
	var source string
	if _, err := pgx.ForEachRow(rows, []any{&id, &source}, func() error { names[id] = source; return nil }); err != nil {
		return nil, err
	}
	var lines []string
	rows, err = q.Query(ctx, `SELECT t.lot, p.order_key, p.result_id, p.revision, p.voided, p.version, p.verdict FROM places p JOIN tracks t USING (track_id)
		JOIN charts c ON c.chart_id = t.chart_id WHERE c.name = $1`, name)
	if err != nil {
		return nil, err
	}
	var lot string
	var key, verdict []byte
	var revision, version int
	var voided bool
	_, err = pgx.ForEachRow(rows, []any{&lot, &key, &id, &revision, &voided, &version, &verdict}, func() error {
		var form map[string]any
		if err := json.Unmarshal(verdict, &form); err != nil {
			return err
		}
		hits, _ := form["h"].([]any)
		for _, h := range hits {
			hit := h.(map[string]any)
			hit["w"], hit["f"] = names[int64(hit["w"].(float64))], names[int64(hit["f"].(float64))]
		}
		text, _ := json.Marshal(form)
		lines = append(lines, fmt.Sprintf("place %s %x %s revision %d voided %v version %d %s", lot, key, names[id], revision, voided, version, text))
		return nil
	})
	if err != nil {
		return nil, err
	}
	rows, err = q.Query(ctx, `SELECT t.lot, s.trace, s.rule, s.side, s.version, s.first_point_result, s.first_hit_result, s.last_hit_result FROM signals s
		JOIN tracks t USING (track_id) JOIN charts c ON c.chart_id = t.chart_id WHERE c.name = $1 AND s.status IN ('OPEN', 'CLOSED')`, name)
	if err != nil {
		return nil, err
	}
	var trace, side int16
	var rule string
	var point, first, last int64
	_, err = pgx.ForEachRow(rows, []any{&lot, &trace, &rule, &side, &version, &point, &first, &last}, func() error {
		lines = append(lines, fmt.Sprintf("signal %s %d %s %d version %d: %s, %s to %s", lot, trace, rule, side, version, names[point], names[first], names[last]))
		return nil
	})
	slices.Sort(lines)
	return lines, err
}
