// Package effort bounds the work of one request: it counts what the computation has done, stops it where the limit is
// reached or its context ends, and tells whoever waits how far it has come.
//
// The unit is one multiplication and addition, roughly a nanosecond. A Meter may be shared by the goroutines of one
// request.
package effort

import (
	"context"
	"fmt"
	"runtime"
	"sync/atomic"
)

// UnitsMax is the limit of a request that asks for none of its own: a minute or so of one processor.
const UnitsMax = 60_000_000_000

// LimitError says that a request costs more than it may.
type LimitError struct{ Units int64 }

func (e *LimitError) Error() string {
	return fmt.Sprintf("the computation needs more than the limit of %.3g operations", float64(e.Units))
}

// Meter counts the work of one request.
type Meter struct {
	ctx   context.Context
	limit int64
	done  atomic.Int64
	// yielded is the count at which the goroutine last let others run.
	yielded atomic.Int64
}

// New gives a meter that stops with the context or after units of work; 0 means UnitsMax.
func New(ctx context.Context, units int64) *Meter {
	if units <= 0 {
		units = UnitsMax
	}
	return &Meter{ctx: ctx, limit: units}
}

// yieldUnits is the work after which other goroutines are let run: a fraction of a millisecond, so that whatever
// answers in milliseconds beside a long computation still does.
const yieldUnits = 500_000

// Spend records units of work. It fails once the context has ended or the limit is passed.
func (m *Meter) Spend(units int64) error {
	done := m.done.Add(units)
	if done > m.limit {
		return &LimitError{m.limit}
	}
	if last := m.yielded.Load(); done-last > yieldUnits && m.yielded.CompareAndSwap(last, done) {
		runtime.Gosched()
		return m.ctx.Err()
	}
	return nil
}

// Done gives the work so far.
func (m *Meter) Done() int64 { return m.done.Load() }

// Context gives the context the meter stops with.
func (m *Meter) Context() context.Context { return m.ctx }
