package store_test

import (
	"fmt"
	"testing"
	"time"

	"limitary/internal/definition"
	"limitary/internal/rules"
	"limitary/internal/store"
)

func TestVersionIsReadBackAsProposed(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	r := req()
	made, err := f.ProposeVersion(t.Context(), f.ann, r, c.Name, limits{chart: c, from: day(0)}.content("ann"))
	if err != nil {
		t.Fatal(err)
	}
	got, patterns, inForce, err := f.GetVersion(t.Context(), f.bob, c.Name, 1)
	if err != nil {
		t.Fatal(err)
	}
	want(t, "digest", got.Digest, definition.DigestOf(got.Canonical()))
	want(t, "state, patterns, in force", []any{got.State, len(patterns), inForce}, []any{definition.Proposed, 0, false})
	want(t, "content", string(got.Canonical()), string(made.Canonical()))
	again, err := f.ProposeVersion(t.Context(), f.ann, r, c.Name, func(int, time.Time) (definition.Content, error) { panic("built again") })
	if err != nil || again.Digest != made.Digest {
		t.Errorf("repeat: digest %q, %v, want %q", again.Digest, err, made.Digest)
	}
	t.Run("by a store that has not seen it", func(t *testing.T) {
		fresh, _, _, err := mustOpen(t, f.db.ServiceURL()).GetVersion(t.Context(), f.bob, c.Name, 1)
		if err != nil || fresh.Digest != made.Digest {
			t.Errorf("digest %q, %v, want %q", fresh.Digest, err, made.Digest)
		}
	})
	t.Run("or not at all, if it was tampered with", func(t *testing.T) {
		conn := f.owner()
		mustExec(t, conn, `ALTER TABLE versions DISABLE TRIGGER USER; ALTER TABLE versions DROP CONSTRAINT versions_digest`)
		mustExec(t, conn, `UPDATE versions SET canonical = convert_to(replace(convert_from(canonical, 'UTF8'), '"process_sigma":1', '"process_sigma":2'), 'UTF8')`)
		if _, _, _, err := mustOpen(t, f.db.ServiceURL()).GetVersion(t.Context(), f.bob, c.Name, 1); err == nil {
			t.Error("a version whose bytes have another digest was served")
		}
	})
}

func TestUnsoundProposalsAreRefused(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	for name, l := range map[string]limits{
		"no effective moment": {chart: c},
		"lot of no track":     {chart: c, from: day(0), lot: "A1"},
		"sigma of zero": {chart: c, from: day(0), edit: func(c *definition.Content) {
			zero := 0.0
			c.Location.Sigma = &zero
		}},
		"rule that cannot be": {chart: c, from: day(0), edit: func(c *definition.Content) { c.Location.Rules[0].K = 2 }},
		"another kind":        {chart: c, from: day(0), edit: func(c *definition.Content) { c.SubgroupSize = 2 }},
		"another unit":        {chart: c, from: day(0), edit: func(c *definition.Content) { c.Unit = "µg/L" }},
		"another judge":       {chart: c, from: day(0), edit: func(c *definition.Content) { c.Judge = 2 }},
		"no decimals":         {chart: c, from: day(0), edit: func(c *definition.Content) { c.Decimals = -1 }},
	} {
		_, err := f.ProposeVersion(t.Context(), f.ann, req(), c.Name, l.content("ann"))
		if refusal := wantReason(t, err, definition.InvalidField); refusal.Field == "" {
			t.Errorf("%s: no field named", name)
		}
	}
	// A builder that strays from what it was given is a fault, and nothing is stored.
	_, err := f.ProposeVersion(t.Context(), f.ann, req(), c.Name, limits{chart: c, from: day(0)}.content("bob"))
	if err == nil {
		t.Error("another author was taken")
	}
	list, _, err := f.ListVersions(t.Context(), f.ann, c.Name, store.Page{})
	if err != nil || len(list) != 0 {
		t.Errorf("got %d versions, %v, want none", len(list), err)
	}
}

// Every action on every state; the actor is always entitled to it.
func TestLifeOfAVersion(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	ctx := t.Context()
	const wrong = definition.WrongState
	actions := map[string]func(c definition.Chart, v definition.Version) error{
		"approve": func(c definition.Chart, v definition.Version) error {
			_, _, err := f.ApproveVersion(ctx, f.bob, req(), c.Name, v.Number, v.Digest, false, "", nil)
			return err
		},
		"reject": func(c definition.Chart, v definition.Version) error {
			_, err := f.RejectVersion(ctx, f.bob, req(), c.Name, v.Number, "no")
			return err
		},
		"withdraw": func(c definition.Chart, v definition.Version) error {
			_, _, _, err := f.WithdrawVersion(ctx, f.bob, req(), c.Name, v.Number, false, "wrong data")
			return err
		},
	}
	for i, row := range []struct {
		before []string
		state  definition.VersionState
		refuse map[string]definition.Reason
	}{
		{nil, definition.Proposed, map[string]definition.Reason{"withdraw": wrong}},
		{[]string{"approve"}, definition.Approved, map[string]definition.Reason{"approve": wrong, "reject": wrong}},
		{[]string{"reject"}, definition.Rejected, map[string]definition.Reason{"approve": wrong, "reject": wrong, "withdraw": wrong}},
		{[]string{"approve", "withdraw"}, definition.Withdrawn, map[string]definition.Reason{"approve": wrong, "reject": wrong, "withdraw": wrong}},
	} {
		for action, act := range actions {
			c := f.mustChart(individuals(fmt.Sprintf("chart-%d-%s", i, action)))
			v := f.mustPropose(limits{chart: c, from: day(0)})
			for _, earlier := range row.before {
				if err := actions[earlier](c, v); err != nil {
					t.Fatalf("%v: %v", row.before, err)
				}
			}
			got, _, _, err := f.GetVersion(ctx, f.ann, c.Name, 1)
			if err != nil || got.State != row.state {
				t.Errorf("%v: state %s, %v, want %s", row.before, got.State, err, row.state)
			}
			err = act(c, v)
			if reason, refused := row.refuse[action]; refused {
				wantReason(t, err, reason)
			} else if err != nil {
				t.Errorf("%s of %s: %v", action, row.state, err)
			}
		}
	}
	c := f.mustChart(individuals("nitrate"))
	_, _, err := f.ApproveVersion(ctx, f.bob, req(), c.Name, 1, "", false, "", nil)
	wantReason(t, err, definition.NotFound)
}

func TestApprovalNeedsAnotherPrincipalAndTheDigest(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	v := f.mustPropose(limits{chart: c, from: day(0)})
	_, _, err := f.ApproveVersion(t.Context(), f.ann, req(), c.Name, 1, v.Digest, false, "", nil)
	wantReason(t, err, definition.SamePrincipal)
	other := definition.DigestOf([]byte("another"))
	_, _, err = f.ApproveVersion(t.Context(), f.bob, req(), c.Name, 1, other, false, "", nil)
	wantReason(t, err, definition.DigestMismatch)
	r := req()
	got, n, err := f.ApproveVersion(t.Context(), f.bob, r, c.Name, 1, v.Digest, false, "", nil)
	if err != nil || n != 0 || got.DecidedBy != "bob" {
		t.Fatalf("got %q, %d rejudged, %v", got.DecidedBy, n, err)
	}
	again, n, err := f.ApproveVersion(t.Context(), f.bob, r, c.Name, 1, v.Digest, false, "", nil)
	if err != nil || n != 0 {
		t.Fatal(n, err)
	}
	want(t, "repeat", again.DecidedAt, got.DecidedAt)
}

func TestVersionInForceIsTheLatestToHaveBegun(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	inForce := func(at time.Time) string {
		v, err := f.VersionInForce(t.Context(), f.cleo, c.Name, "", at)
		if err != nil {
			wantReason(t, err, definition.NoVersionInForce)
			return "none"
		}
		return fmt.Sprint(v.Number)
	}
	f.mustApprove(limits{chart: c, from: day(10)})             // 1
	f.mustApprove(limits{chart: c, from: day(20), centre: 11}) // 2
	f.mustApprove(limits{chart: c, from: day(20), centre: 12}) // 3 begins with 2 and has the higher number
	f.mustApprove(limits{chart: c, from: day(5), centre: 13})  // 4 begins before 1
	f.mustPropose(limits{chart: c, from: day(6)})              // 5 is not approved
	future := f.mustApprove(limits{chart: c, from: time.Now().AddDate(1, 0, 0)})
	points := []time.Time{day(5).Add(-time.Microsecond), day(5), day(10).Add(-time.Microsecond), day(10), day(20), {}}
	var got []string
	for _, at := range points {
		got = append(got, inForce(at))
	}
	want(t, "in force", got, "[none 4 4 1 3 3]")
	for number, in := range map[int]bool{2: false, 3: true, 5: false, future.Number: false} {
		_, _, inForce, err := f.GetVersion(t.Context(), f.cleo, c.Name, number)
		if err != nil || inForce != in {
			t.Errorf("version %d in force: got %v, %v, want %v", number, inForce, err, in)
		}
	}
	t.Run("and its withdrawal leaves nothing until the next", func(t *testing.T) {
		for _, number := range []int{3, 4} {
			if _, _, _, err := f.WithdrawVersion(t.Context(), f.bob, req(), c.Name, number, false, "wrong data"); err != nil {
				t.Fatal(err)
			}
		}
		got = nil
		for _, at := range points {
			got = append(got, inForce(at))
		}
		want(t, "in force", got, "[none none none 1 none none]")
		want(t, "of the track", f.mustTrack(c, "").Version, 0)
	})
}

func TestVersionOfALotIsInForceForItsTrackOnly(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	lotted := individuals("nitrate")
	lotted.LotsAreTracks = true
	c := f.mustChart(lotted)
	for _, lot := range []string{"A1", "B2"} {
		if _, err := f.StartLot(t.Context(), f.ann, req(), c.Name, lot); err != nil {
			t.Fatal(err)
		}
	}
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustApprove(limits{chart: c, from: day(1), lot: "B2", centre: 20})
	for lot, number := range map[string]int{"": 1, "A1": 1, "B2": 2} {
		v, err := f.VersionInForce(t.Context(), f.cleo, c.Name, lot, day(2))
		if err != nil || v.Number != number {
			t.Errorf("lot %q: version %d, %v, want %d", lot, v.Number, err, number)
		}
	}
	_, err := f.VersionInForce(t.Context(), f.cleo, c.Name, "C3", day(2))
	wantReason(t, err, definition.NotFound)
	f.mustPost(c, "A1", 2, "10", "20")
	f.mustPost(c, "B2", 2, "10", "20")
	want(t, "A1", f.verdicts(c, "A1"), "CLEAR/1 STOP/1")
	want(t, "B2", f.verdicts(c, "B2"), "STOP/2 CLEAR/2")
	f.mustRecheck()
}

func TestApprovalThatTouchesStoredResultsIsRetroactive(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustPost(c, "", 0, "10", "14", "10.5", "11", "9")
	want(t, "without a version", f.verdicts(c, ""), "NOT_JUDGED/0 NOT_JUDGED/0 NOT_JUDGED/0 NOT_JUDGED/0 NOT_JUDGED/0")
	v := f.mustPropose(limits{chart: c, from: day(1)})
	approve := func(v definition.Version, rejudge bool, reason string) (int, error) {
		_, n, err := f.ApproveVersion(t.Context(), f.bob, req(), c.Name, v.Number, v.Digest, rejudge, reason, nil)
		return n, err
	}
	for _, ask := range []struct {
		rejudge bool
		reason  string
	}{{false, ""}, {false, "why not"}, {true, ""}} {
		_, err := approve(v, ask.rejudge, ask.reason)
		if refusal := wantReason(t, err, definition.Retroactive); refusal.Meta["results"] != "4" {
			t.Errorf("got meta %v, want 4 results", refusal.Meta)
		}
	}
	n, err := approve(v, true, "limits came late")
	if err != nil || n != 4 {
		t.Fatalf("got %d rejudged, %v, want 4", n, err)
	}
	want(t, "judged", f.verdicts(c, ""), "NOT_JUDGED/0 STOP/1 CLEAR/1 CLEAR/1 CLEAR/1")
	want(t, "track", f.mustTrack(c, "").State(), store.TrackHold)

	t.Run("but one that begins after the last result is not", func(t *testing.T) {
		if _, err := approve(f.mustPropose(limits{chart: c, from: day(4).Add(time.Microsecond), centre: 11}), false, ""); err != nil {
			t.Error(err)
		}
	})
	t.Run("nor one that is succeeded before the first", func(t *testing.T) {
		n, err := approve(f.mustPropose(limits{chart: c, from: day(0).Add(time.Hour), centre: 11}), false, "")
		if err != nil || n != 0 {
			t.Errorf("got %d rejudged, %v", n, err)
		}
	})
	t.Run("and so is a withdrawal", func(t *testing.T) {
		_, _, _, err := f.WithdrawVersion(t.Context(), f.bob, req(), c.Name, v.Number, false, "wrong data")
		if refusal := wantReason(t, err, definition.Retroactive); refusal.Meta["results"] != "4" {
			t.Errorf("got meta %v, want 4 results", refusal.Meta)
		}
		want(t, "rejudged by the confirmed withdrawal", f.mustWithdraw(c, v.Number, "wrong data"), 4)
		want(t, "judged", f.verdicts(c, ""), "NOT_JUDGED/0 NOT_JUDGED/0 NOT_JUDGED/0 NOT_JUDGED/0 NOT_JUDGED/0")
		want(t, "signals left open", len(f.mustSignals(c, "OPEN")), 0)
		want(t, "signals retracted", len(f.mustSignals(c, "RETRACTED")), 1)
	})
	f.mustRecheck()
}

// A version in between ends the segment that reached across its time, so later results under a version that does not
// change are judged anew as well: they were the ends of runs that began before.
func TestVersionInBetweenCutsRunsThatReachAcross(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustApprove(limits{chart: c, from: day(4)}) // the same numbers: the segment goes on
	f.mustPost(c, "", 0, "10.5", "10.5", "", "", "10.5", "10.5")
	want(t, "before", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/2 ACT/2")
	between := f.mustPropose(limits{chart: c, from: day(2), centre: 12})
	_, patterns, _, err := f.GetVersion(t.Context(), f.bob, c.Name, between.Number)
	if err != nil || len(patterns) != 1 {
		t.Fatalf("got patterns %v, %v, want one", patterns, err)
	}
	accepted := []string{patterns[0].Text()}
	want(t, "pattern", accepted[0], "|location|lab/2|2 of 4 upper")
	_, _, err = f.ApproveVersion(t.Context(), f.bob, req(), c.Name, between.Number, between.Digest, false, "", accepted)
	if refusal := wantReason(t, err, definition.Retroactive); refusal.Meta["results"] != "2" {
		t.Errorf("got meta %v, want the 2 results after it", refusal.Meta)
	}
	_, n, err := f.ApproveVersion(t.Context(), f.bob, req(), c.Name, between.Number, between.Digest, true, "found later", accepted)
	if err != nil || n != 1 {
		t.Errorf("got %d rejudged, %v, want 1", n, err)
	}
	want(t, "after", f.verdicts(c, ""), "CLEAR/1 CLEAR/1 CLEAR/2 CLEAR/2")
	f.mustRecheck()
	_, n, ch, err := f.WithdrawVersion(t.Context(), f.bob, req(), c.Name, between.Number, true, "not so")
	if err != nil || n != 0 || ch != nil {
		// Nothing is in force in its place, so the segment does not go on.
		t.Errorf("withdrawal: got %d rejudged, change %v, %v, want none", n, ch, err)
	}
	f.mustRecheck()
}

func TestPatternsInProgressAreAcceptedExactlyAsListed(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	f.mustApprove(limits{chart: c, from: day(0)})
	f.mustPost(c, "", 0, "9", "10.1", "10.2", "10.3")
	v := f.mustPropose(limits{chart: c, from: day(9), centre: 11})
	listed := func(v definition.Version) (texts []string) {
		_, patterns, _, err := f.GetVersion(t.Context(), f.bob, c.Name, v.Number)
		if err != nil {
			t.Fatal(err)
		}
		for _, p := range patterns {
			texts = append(texts, p.Text())
		}
		return texts
	}
	want(t, "listed", listed(v), "[|location|lab/2|3 of 4 upper]")
	approve := func(v definition.Version, accepted ...string) error {
		_, _, err := f.ApproveVersion(t.Context(), f.bob, req(), c.Name, v.Number, v.Digest, false, "", accepted)
		return err
	}
	for _, accepted := range [][]string{nil, {"|location|lab/2|2 of 4 upper"}, {"|location|lab/2|3 of 4 upper", "another"}} {
		refusal := wantReason(t, approve(v, accepted...), definition.PatternsNotAccepted)
		want(t, "listed with the refusal", refusal.Meta["patterns"], "|location|lab/2|3 of 4 upper")
	}
	t.Run("not at all where the numbers stay", func(t *testing.T) {
		same := f.mustPropose(limits{chart: c, from: day(9)})
		want(t, "listed", len(listed(same)), 0)
		wantReason(t, approve(same, "|location|lab/2|3 of 4 upper"), definition.PatternsNotAccepted)
	})
	t.Run("not at all where something else ends them first", func(t *testing.T) {
		if _, _, err := f.AddMark(t.Context(), f.ann, req(), store.Mark{Chart: c.Name, At: day(9), Text: "new lamp", Break: true}, "", ""); err != nil {
			t.Fatal(err)
		}
		want(t, "listed", len(listed(v)), 0)
	})
	t.Run("as they are now, not as they were read", func(t *testing.T) {
		earlier := f.mustPropose(limits{chart: c, from: day(8), centre: 11})
		read := listed(earlier)
		f.mustPost(c, "", 4, "9")
		wantReason(t, approve(earlier, read...), definition.PatternsNotAccepted)
		if err := approve(earlier, listed(earlier)...); err != nil {
			t.Error(err)
		}
	})
}

func TestBasisIsWhatAnEstimateMayRestOn(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	gappy := individuals("nitrate")
	gappy.LongestGap = 36 * time.Hour
	c := f.mustChart(gappy)
	f.mustPost(c, "", 0, "10", "11", "", "12", "13", "14", "15")
	repeat := result(c, 20, "99")
	repeat.MeasuredAt, repeat.Role, repeat.RepeatOf = day(5).Add(time.Hour), definition.Repeat, "r005"
	if answer, err := f.PostResults(t.Context(), f.ann, []definition.Result{repeat}, true, nil); err != nil || answer.Rows[0].Outcome != store.Accepted {
		t.Fatal(answer, err)
	}
	if _, _, err := f.AddMark(t.Context(), f.ann, req(), store.Mark{Chart: c.Name, At: day(6), Text: "new lamp", Break: true}, "", ""); err != nil {
		t.Fatal(err)
	}
	change, err := f.VoidResult(t.Context(), f.ann, req(), c.Name, "lims", "r004", 1, "SPILT", "spilt")
	if err != nil {
		t.Fatal(err)
	}
	if _, _, err := f.DecideChange(t.Context(), f.bob, req(), change.ID, true, "", nil); err != nil {
		t.Fatal(err)
	}
	amended := result(c, 1, "11.5")
	if _, _, err := f.AmendResult(t.Context(), f.ann, req(), amended, 1, "TYPO", "misread"); err != nil {
		t.Fatal(err)
	}
	rows := func(from, to time.Time) (words []string) {
		list, err := f.BasisResults(t.Context(), f.cleo, c.Name, "", from, to)
		if err != nil {
			t.Fatal(err)
		}
		for _, r := range list {
			word := r.Result.Readings[0]
			if r.BreakBefore {
				word = "|" + word
			}
			words = append(words, word)
		}
		return words
	}
	// A gap before 12, a void before 14, a mark before 15; the repeat of 14 is none of it.
	want(t, "all", rows(time.Time{}, time.Time{}), "[10 11.5 |12 |14 |15]")
	want(t, "from and to", rows(day(1), day(5)), "[11.5 |12]")
	want(t, "none", rows(day(30), time.Time{}), "[]")
}

func TestJudgeOfAVersionIsItsOwn(t *testing.T) {
	t.Parallel()
	f := newFixture(t)
	c := f.mustChart(individuals("nitrate"))
	v := f.mustPropose(limits{chart: c, from: day(0)})
	for name, s := range map[string]*store.Store{"that made it": f.Store, "that never saw it": mustOpen(t, f.db.ServiceURL())} {
		j, err := s.VersionJudge(v)
		if err != nil {
			t.Fatal(err)
		}
		hits := j.Series([]float64{10, 13, 13.01})
		if len(hits) != 1 || hits[0].Point != 2 || hits[0].Side != rules.Upper {
			t.Errorf("store %s: got hits %v, want one at the third point", name, hits)
		}
	}
}
