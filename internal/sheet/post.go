package sheet

import (
	"context"
	"fmt"
	"net/http"
	"strconv"
	"strings"

	pb "limitary/api/limitary/v1"
)

var (
	postedColumns  = addedColumns("outcome", "standing", "rules", "version", "track_state", "note")
	previewColumns = addedColumns("outcome", "id", "time", "readings", "note")
)

// troublesShown bounds the bad rows that a refusal lists.
const troublesShown = 20

// post stores the rows of a pasted block.
func (h *Handler) post(r *request) (*answer, error) {
	whole, err := r.flag("all_or_nothing", true)
	if err != nil {
		return nil, err
	}
	preview, err := r.flag("preview", false)
	if err != nil {
		return nil, err
	}
	b, err := r.batchOfResults()
	if err != nil {
		return nil, err
	}
	if preview {
		if err := h.mayPost(r.ctx()); err != nil {
			return nil, err
		}
		if err := h.checkChart(r.ctx(), b); err != nil {
			return nil, err
		}
		return b.preview(whole)
	}
	if whole && len(b.troubles) > 0 {
		return nil, nothingStored(b.troubles)
	}
	if err := h.store(r.ctx(), b, whole); err != nil {
		return nil, err
	}
	if bad := b.refused(); whole && len(bad) > 0 {
		return nil, nothingStored(bad)
	}
	return b.answered()
}

// nothingStored names what is wrong by row and column.
func nothingStored(all []*trouble) error {
	var lines []string
	for _, t := range all[:min(len(all), troublesShown)] {
		lines = append(lines, t.String())
	}
	if more := len(all) - len(lines); more > 0 {
		lines = append(lines, fmt.Sprintf("and %d more", more))
	}
	return &refusal{status: http.StatusUnprocessableEntity, text: "nothing stored: " + strings.Join(lines, "\n")}
}

// store posts the good rows.
func (h *Handler) store(ctx context.Context, b *rows, whole bool) error {
	in := &pb.PostResultsRequest{AllOrNothing: whole}
	var places []int
	for i, r := range b.results {
		if r != nil {
			in.Results = append(in.Results, r)
			places = append(places, i)
		}
	}
	if len(in.Results) == 0 {
		return nothingStored(b.troubles)
	}
	got, err := h.evaluations.PostResults(ctx, in)
	if err != nil {
		return err
	}
	for i, p := range got.Results {
		b.posted[places[i]] = p
	}
	return nil
}

// refused lists the rows that the service did not store, those that are at fault themselves.
func (b *rows) refused() (all []*trouble) {
	for i, p := range b.posted {
		switch p.GetOutcome() {
		case pb.PostOutcome_POST_OUTCOME_REFUSED, pb.PostOutcome_POST_OUTCOME_CONFLICT:
			all = append(all, b.asTrouble(i))
		}
	}
	return all
}

// asTrouble says what the service says of a row, with the row's number and the column's name.
func (b *rows) asTrouble(i int) *trouble {
	p := b.posted[i]
	text, field := p.Message, p.Field
	if at := strings.Index(field, "]."); strings.HasPrefix(field, "results[") && at > 0 {
		field = field[at+2:]
	}
	text = strings.TrimPrefix(text, p.Field+": ")
	switch {
	case p.Outcome == pb.PostOutcome_POST_OUTCOME_CONFLICT && b.first[i] != i && !sameContent(nil, b.all[b.first[i]], b.all[i]):
		text, field = b.otherContent(b.first[i]), "source_id"
	case p.Outcome == pb.PostOutcome_POST_OUTCOME_CONFLICT:
		text = fmt.Sprintf("the id is stored with other content: measured %s, %s", p.Stored.GetMeasuredAt(), measuredText(p.Stored))
		field = "source_id"
	case field == "readings" && strings.Contains(text, "takes a count"):
		text += wantInspected
	case field == "count" && strings.HasPrefix(text, "inspected "):
		field = "inspected"
	}
	return &trouble{b.Rows[i].Number, b.columnOf(field), text}
}

// wantInspected says how a count is given.
const wantInspected = "; give the number inspected in a column inspected, or say inspected="

// measuredText is what a result holds, in words.
func measuredText(r *pb.Result) string {
	if c := r.GetCount(); c != nil {
		return fmt.Sprintf("%v of %v inspected", c.Nonconforming, c.Inspected)
	}
	return "readings " + strings.Join(r.GetReadings(), " ")
}

// columnOf gives the column of a field of the contract.
func (b *rows) columnOf(field string) string {
	name, _, _ := strings.Cut(field, "[")
	switch name {
	case "readings":
		k := 0
		_, _ = fmt.Sscanf(field, "readings[%d]", &k)
		return b.Names[b.values[min(k, len(b.values)-1)]]
	case "count":
		return b.Names[b.values[0]]
	case "source_id":
		return b.Names[b.columns.id]
	case "measured_at":
		return b.Names[b.columns.time]
	}
	return name
}

// answered gives the block back with what was stored.
func (b *rows) answered() (*answer, error) {
	more := make([][]string, len(b.Rows))
	for i := range more {
		more[i] = b.line(i)
	}
	return b.answer(postedColumns, b.saying(more))
}

// saying adds what is not read.
func (b *rows) saying(more [][]string) [][]string {
	b.sayUnread(more, b.columns.id, b.columns.time, b.columns.source)
	return more
}

func (b *rows) line(i int) []string {
	p := b.posted[i]
	switch {
	case b.trouble[i] != nil:
		return []string{"REFUSED", "", "", "", "", b.trouble[i].String()}
	case p == nil:
		return make([]string, len(postedColumns))
	}
	outcome, state := word(p.Outcome.String(), "POST_OUTCOME_"), stateWord(p.TrackState)
	if p.TrackState == pb.TrackState_TRACK_STATE_UNSPECIFIED {
		state = ""
	}
	v := p.CurrentVerdict
	if v == nil {
		v = p.Verdict
	}
	switch p.Outcome {
	case pb.PostOutcome_POST_OUTCOME_ACCEPTED, pb.PostOutcome_POST_OUTCOME_DUPLICATE:
		return []string{outcome, standingWord(v.GetStanding(), v.GetReason()), storedRules(v), versionText(v), state, v.GetInstruction()}
	}
	return []string{outcome, "", "", "", state, b.asTrouble(i).String()}
}

func versionText(v *pb.ResultVerdict) string {
	if v.GetVersion() == 0 {
		return ""
	}
	return strconv.Itoa(int(v.Version))
}

func storedRules(v *pb.ResultVerdict) string {
	var all []string
	for _, hit := range v.GetHits() {
		all = append(all, hitText(hit.Trace, hit.Rule, hit.Side))
	}
	return strings.Join(all, ", ")
}
