package rules

// Slots gives the accumulators of the EWMA and CUSUM rules, for checks of their course against printed tables.
func (st *State) Slots() []float64 { return st.slots }
