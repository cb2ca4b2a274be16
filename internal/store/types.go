package store

import (
	"time"

	"limitary/internal/chart"
	"limitary/internal/definition"
	"limitary/internal/judge"
	"limitary/internal/rules"
)

// Actor is who asks, for the audit chain and for what they may see.
type Actor struct {
	Principal string
	Key       definition.Key
}

// Request makes a write safe to repeat: the same principal, id and digest get the first answer again.
type Request struct {
	ID     string
	Method string
	// Digest is SHA-256 over the request as sent.
	Digest []byte
}

// TrackState is where a track stands.
type TrackState uint8

const (
	TrackClear TrackState = iota
	TrackOpenSignal
	TrackHold
)

// Track is one track with its current state.
type Track struct {
	ID             int64
	Chart, Lot     string
	Results        int64
	OpenSignals    int
	Occurrence     int64
	HoldSince      time.Time // when the latest STOP was recorded; zero: not on hold
	LastMeasuredAt time.Time // zero: no results
	// Version is the number in force at the moment of reading, 0 for none.
	Version int
}

// State derives the track's state.
func (t Track) State() TrackState {
	switch {
	case !t.HoldSince.IsZero():
		return TrackHold
	case t.OpenSignals > 0:
		return TrackOpenSignal
	}
	return TrackClear
}

// Key names a result for people: its natural key within the chart, and when it was measured.
type Key struct {
	ResultID         int64
	Source, SourceID string
	MeasuredAt       time.Time
}

// Hit is a rule completing at a stored result.
type Hit struct {
	Role        chart.Role
	Rule        string
	Side        rules.Side
	Consequence rules.Consequence
	// First results of the examined window and of those that count.
	WindowFirst, FirstCounting Key
}

// Verdict is a stored verdict, with the lines it was judged by.
type Verdict struct {
	Standing judge.Standing
	Reason   judge.Reason
	ByBound  bool
	// Version that judged, 0 for none, and the judge's number.
	Version, Judge int
	Traces         [chart.Roles]TraceVerdict
	Hits           []Hit
	Instruction    string
	RecordedAt     time.Time
	// By is the judge of the version; nil where there was none.
	By *judge.Judge
}

// TraceVerdict is the point of one trace.
type TraceVerdict struct {
	Point     bool
	Statistic float64
	Scale     rules.Scale
	Lines     judge.Lines
}

// StoredResult is a result as it now stands.
type StoredResult struct {
	ID         int64
	Result     definition.Result
	Revision   int
	Voided     bool
	Poster     string
	RecordedAt time.Time
	Verdict    Verdict
}

// Revision is one state a result has had, with the verdicts on it.
type Revision struct {
	Number                 int
	Result                 definition.Result
	Voided                 bool
	Author, ConfirmedBy    string
	ReasonCode, ReasonText string
	RecordedAt             time.Time
	Verdicts               []Verdict
}

// Outcome is what became of one posted row.
type Outcome uint8

const (
	Accepted Outcome = iota + 1
	Duplicate
	Conflict
	Refused
	NotStored
)

// Posted answers one row of a post.
type Posted struct {
	Outcome Outcome
	// Problem says why, for every outcome but Accepted and Duplicate.
	Problem *definition.Error
	// First is the verdict as committed when the result was first posted, Current the present one.
	First, Current Verdict
	// Stored is what is kept, for a conflict.
	Stored     definition.Result
	TrackState TrackState
	HasTrack   bool
}

// SignalChange is what a transaction did to a signal.
type SignalChange struct {
	SignalID    int64
	Change      string // OPENED, CHANGED, MERGED, RETRACTED
	Role        chart.Role
	Rule        string
	Side        rules.Side
	Consequence rules.Consequence
}

// TrackUpdate is what a transaction did to a track.
type TrackUpdate struct {
	Track   Track
	Signals []SignalChange
	// Rejudged counts earlier results whose verdict changed.
	Rejudged int
	// OrderNotKnown is set where results have equal times and no position.
	OrderNotKnown bool
}

// PostAnswer answers a post: rows in order, tracks by chart and lot.
type PostAnswer struct {
	Rows   []Posted
	Tracks []TrackUpdate
}

// Signal is one episode as it now stands.
type Signal struct {
	ID                            int64
	Chart, Lot                    string
	Role                          chart.Role
	Rule                          string
	Side                          rules.Side
	Consequence                   rules.Consequence
	Version                       int
	Status                        string
	Occurrence                    int64
	FirstPoint, FirstHit, LastHit Key
	MergedInto                    int64
	ChangedAfterClosing           bool
	OpenedAt, ClosedAt            time.Time
	ClosedBy, Decision, Cause     string
	// Description says what the rule looks for, from the version.
	Description string
}

// SignalEvent is one thing that happened to a signal.
type SignalEvent struct {
	Change, Status                string
	Version                       int
	FirstPoint, FirstHit, LastHit Key
	MergedInto                    int64
	Principal, Text               string
	RecordedAt                    time.Time
}

// Note is a person's note on a signal.
type Note struct {
	Author, Text string
	RecordedAt   time.Time
}

// Mark is an event on the time axis.
type Mark struct {
	ID             int64
	Chart, Lot     string
	At             time.Time
	Text           string
	Break, Restart bool
	Author         string
	RecordedAt     time.Time
	Voided         bool
}

// Change is a change one principal asked for.
type Change struct {
	ID                 int64
	Kind               string // VOID_RESULT, AMEND_RESULT, ADD_MARK, VOID_MARK, WITHDRAW_VERSION
	Status             string // PENDING, CONFIRMED, REJECTED
	Chart              string
	Source, SourceID   string
	MarkID             int64
	Version            int // the number to withdraw, 0 for none
	ReasonCode, Reason string
	Author             string
	CreatedAt          time.Time
	DecidedBy          string
	DecidedAt          time.Time
	DecisionReason     string
	VerdictsChanged    int
	SignalsEnded       []int64
	// Fields is what it would set, against what stands now.
	Fields []FieldChange
}

// FieldChange is one thing a change would set, in the contract's words.
type FieldChange struct{ Field, From, To string }

// Pattern is a pattern in progress that a version would end.
type Pattern struct {
	Lot        string
	Role       chart.Role
	Rule       string
	Side       rules.Side
	Have, Need int
}
