package store

import (
	"context"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"limitary/internal/definition"
	"limitary/internal/track"
)

// ApproveVersion puts a proposed version in force from its effective moment. The approver is another principal than the
// author, names the digest that was read, and accepts the patterns in progress that the version ends exactly as they are
// listed now. Where stored results would be judged by another version it is refused with their number unless rejudge is
// set and a reason given; they are then judged anew, and the number of changed verdicts is the answer.
func (s *Store) ApproveVersion(ctx context.Context, a Actor, req Request, chart string, number int, digest string, rejudge bool, reason string, accepted []string) (made definition.Version, rejudged int, err error) {
	defer wrap(ctx, &err, "ApproveVersion")
	if err := definition.CheckText("reason", reason, 0, definition.TextBytesMax); err != nil {
		return made, 0, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, tracks, err := w.openChart(ctx, chart)
		if err != nil {
			return nil, err
		}
		v, err := s.versionIn(ctx, w, c, number, definition.Proposed)
		if err != nil {
			return nil, err
		}
		if err := mayApprove(v, a, digest); err != nil {
			return nil, err
		}
		before, err := s.timeline(ctx, w.tx, c)
		if err != nil {
			return nil, err
		}
		ready, err := s.version(ctx, w.tx, c.ID, number)
		if err != nil {
			return nil, err
		}
		if err := s.mayTouch(ctx, w, c, tracks, before, before.with(ready), rejudge, reason); err != nil {
			return nil, err
		}
		patterns, err := patternsEnded(ctx, w.tx, before, tracks, v.Content)
		if err != nil {
			return nil, err
		}
		if err := acceptedAsListed(patterns, accepted); err != nil {
			return nil, err
		}
		made, rejudged, err = s.decide(ctx, w, c, tracks, before, v, decision{definition.Approved, 1, "APPROVE_VERSION", reason, texts(patterns)})
		return versionAnswer{Chart: chart, Number: number, Rejudged: rejudged}, err
	}, s.replayVersion(a, &made, &rejudged))
	return made, rejudged, err
}

// versionIn reads a version that must be in a state.
func (s *Store) versionIn(ctx context.Context, w *work, c *chartRow, number int, want definition.VersionState) (definition.Version, error) {
	v, err := s.readVersion(ctx, w.tx, c, number)
	if err == nil && v.State != want {
		err = &definition.Error{Reason: definition.WrongState, Field: "version", Text: fmt.Sprintf("version %d is %s, and must be %s", number, v.State, want),
			Meta: map[string]string{"state": string(v.State)}}
	}
	return v, err
}

func mayApprove(v definition.Version, a Actor, digest string) error {
	if v.Author == a.Principal {
		return definition.Refuse(definition.SamePrincipal, "version %d was proposed by %q; another principal approves it", v.Number, v.Author)
	}
	if v.Digest != digest {
		return &definition.Error{Reason: definition.DigestMismatch, Field: "digest", Text: fmt.Sprintf("%q is not the digest of version %d; read it again", digest, v.Number)}
	}
	return nil
}

// mayTouch refuses a change of the timeline that touches stored results, unless that is wanted and a reason is given.
func (s *Store) mayTouch(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, before, after *timeline, rejudge bool, reason string) error {
	if rejudge && reason != "" {
		return nil
	}
	results, err := s.touches(ctx, w, c, tracks, before, after)
	if err != nil || results == 0 {
		return err
	}
	return retroactive(results)
}

func retroactive(results int) *definition.Error {
	return &definition.Error{Reason: definition.Retroactive, Meta: map[string]string{"results": strconv.Itoa(results)},
		Text: fmt.Sprintf("%d stored results would be judged anew; ask for it with rejudge and give a reason", results)}
}

// touches counts the stored results that a change of the timeline touches.
func (s *Store) touches(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, before, after *timeline) (results int, err error) {
	for _, t := range tracks {
		for _, part := range stretches(before.forTrack(t.Lot), after.forTrack(t.Lot)) {
			from, to := part.touches()
			n, err := s.touched(ctx, w, c, t, from, to)
			if err != nil {
				return 0, err
			}
			results += n
		}
	}
	return results, nil
}

// decision is what is recorded of a version.
type decision struct {
	state    definition.VersionState
	step     int
	kind     string
	reason   string
	patterns []string
}

// decide records a decision and, where it changes what is in force, judges anew what it touches.
func (s *Store) decide(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, before *timeline, v definition.Version, d decision) (definition.Version, int, error) {
	fail := func(err error) (definition.Version, int, error) { return definition.Version{}, 0, err }
	entry, err := w.entry(ctx, c.ID)
	if err != nil {
		return fail(err)
	}
	if d.patterns == nil {
		d.patterns = []string{}
	}
	updates, err := s.carryOutDecision(ctx, w, c, tracks, before, v, d, entry)
	if err != nil {
		return fail(err)
	}
	rejudged, _ := effectOn(updates)
	if err := w.seal(ctx, c.ID, entry, d.kind, versionSaid{v.Number, v.Digest, d.reason, d.patterns, rejudged}); err != nil {
		return fail(err)
	}
	v, err = s.readVersion(ctx, w.tx, c, v.Number)
	return v, rejudged, err
}

// carryOutDecision writes a decision under an entry, without sealing it, and judges anew.
func (s *Store) carryOutDecision(ctx context.Context, w *work, c *chartRow, tracks []*trackRow, before *timeline, v definition.Version, d decision, entry int64) ([]TrackUpdate, error) {
	_, err := w.tx.Exec(ctx, `INSERT INTO version_decisions (chart_id, number, decision, step, author, decided_by, reason, accepted_patterns, recorded_at, entry)
		VALUES ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10)`,
		c.ID, v.Number, string(d.state), d.step, v.Author, w.actor.Principal, d.reason, d.patterns, w.now, entry)
	if err != nil || d.state == definition.Rejected {
		return nil, err
	}
	if err := w.newTimeline(ctx, c); err != nil {
		return nil, err
	}
	return s.rejudgeStretches(ctx, w, c, tracks, before, entry)
}

// RejectVersion ends a proposal.
func (s *Store) RejectVersion(ctx context.Context, a Actor, req Request, chart string, number int, reason string) (made definition.Version, err error) {
	defer wrap(ctx, &err, "RejectVersion")
	if err := definition.CheckText("reason", reason, 0, definition.TextBytesMax); err != nil {
		return made, err
	}
	err = s.change(ctx, a, req, func(ctx context.Context, w *work) (any, error) {
		c, err := w.lockChart(ctx, chart)
		if err != nil {
			return nil, err
		}
		v, err := s.versionIn(ctx, w, c, number, definition.Proposed)
		if err != nil {
			return nil, err
		}
		made, _, err = s.decide(ctx, w, c, nil, nil, v, decision{definition.Rejected, 1, "REJECT_VERSION", reason, nil})
		return versionAnswer{Chart: chart, Number: number}, err
	}, s.replayVersion(a, &made, new(int)))
	return made, err
}

// acceptedAsListed refuses an approval that accepts other patterns than those listed now.
func acceptedAsListed(patterns []Pattern, accepted []string) error {
	want, got := texts(patterns), slices.Clone(accepted)
	slices.Sort(want)
	slices.Sort(got)
	if slices.Equal(want, slices.Compact(got)) {
		return nil
	}
	text := "no pattern in progress would end, and some are accepted"
	if len(want) > 0 {
		text = fmt.Sprintf("the version would end %d patterns in progress, which must be accepted exactly as listed: %s", len(want), strings.Join(want, "; "))
	}
	return &definition.Error{Reason: definition.PatternsNotAccepted, Field: "accepted_patterns", Text: text,
		// One a line: no part of a pattern has a line feed.
		Meta: map[string]string{"patterns": strings.Join(want, "\n")}}
}

func texts(patterns []Pattern) (list []string) {
	for _, p := range patterns {
		list = append(list, p.Text())
	}
	return list
}

// Text is the form in which a pattern is accepted, such as "|location|nelson-1984/2|8 of 9 upper": lot, trace, rule and
// how far it is.
func (p Pattern) Text() string {
	text := fmt.Sprintf("%s|%s|%s|%d of %d", p.Lot, p.Role, p.Rule, p.Have, p.Need)
	if side := strings.ToLower(p.Side.String()); side != "none" {
		text += " " + side
	}
	return text
}

// patternsEnded lists, track by track, the patterns in progress that a version would end by starting a new segment: those
// of the version in force just before, as they stand after the last result before the version's effective moment.
func patternsEnded(ctx context.Context, q querier, tl *timeline, tracks []*trackRow, v definition.Content) (list []Pattern, err error) {
	with := tl.with(&track.Version{Content: v})
	for _, t := range tracks {
		spans := tl.forTrack(t.Lot)
		last, err := placeBefore(ctx, q, t.ID, definition.KeyTime(v.EffectiveFrom))
		if err != nil {
			return nil, err
		}
		if last == nil || segmentEnds(spans, last.At, v.EffectiveFrom) || !segmentEnds(with.forTrack(t.Lot), last.At, v.EffectiveFrom) {
			continue
		}
		runner := track.NewRunner(spans, nil)
		if err := runner.Resume(last.At, last.Stored.State); err != nil {
			return nil, err
		}
		of := spans.InForce(last.At)
		for _, p := range runner.Progress() {
			rule := of.Compiled.Plan(p.Role).Specs()[p.Rule].ID
			list = append(list, Pattern{t.Lot, p.Role, rule, p.Side, p.Have, p.Need})
		}
	}
	return list, nil
}

// segmentEnds reports whether a new segment starts after one moment and not after another.
func segmentEnds(spans track.Timeline, after, upTo time.Time) bool {
	for _, s := range spans.Spans[spans.At(after)+1:] {
		if s.From.After(upTo) {
			return false
		}
		if s.Break {
			return true
		}
	}
	return false
}
