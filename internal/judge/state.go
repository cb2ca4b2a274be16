package judge

import (
	"encoding/binary"
	"errors"
	"math"

	"limitary/internal/chart"
)

// AppendState appends the stored form of a state to b. Equal forms judge every continuation alike.
func (j *Judge) AppendState(b []byte, st *State) []byte {
	if st.hasPrev {
		b = append(b, 1)
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(st.prev))
	} else {
		b = append(b, 0)
	}
	for role, p := range j.plans {
		if p != nil {
			b = p.AppendState(b, st.traces[role])
		}
	}
	return b
}

// LoadState reads a form that AppendState wrote for the same limits and rules. After an error st is fit for Reset only.
func (j *Judge) LoadState(b []byte, st *State) (err error) {
	if len(b) == 0 || b[0] > 1 || b[0] == 1 && len(b) < 9 {
		return errors.New("judge: stored state has an unknown format")
	}
	st.hasPrev = b[0] == 1
	b = b[1:]
	if st.hasPrev {
		st.prev = math.Float64frombits(binary.LittleEndian.Uint64(b))
		if !finite(st.prev) {
			return errors.New("judge: stored state holds a reading that is not a number")
		}
		b = b[8:]
	}
	for role, p := range j.plans {
		if p == nil {
			continue
		}
		if b, err = p.LoadState(b, st.traces[role]); err != nil {
			return err
		}
	}
	if len(b) != 0 {
		return errors.New("judge: stored state is longer than these rules keep")
	}
	return nil
}

// Reach is how many points of a judged trace back a coming hit may refer.
func (j *Judge) Reach(role chart.Role, st *State) int { return j.plans[role].Reach(st.traces[role]) }
