// Package automaton turns run rules into deterministic finite automata.
//
// A windowed rule cares about a point only through a few features: beyond this line, above the centre, higher than the
// point before. The zones between all lines of a rule list are the letters of an alphabet, and a rule is a machine that
// reads letters and fires. A list of rules fires where one of them does, so its machine is the product of theirs;
// Product builds the part of it that can be reached, two machines at a time, and Minimise merges states with the same
// future after each step, so that no intermediate machine is much larger than needed. Firing ends a machine made to
// find the first signal; one that is made continuing goes on, as the judge does, and says at each point whether a
// rule completed.
//
// Trend and alternation look at the order of neighbours, which zones tell only where the two points lie in different
// ones; moving ranges look at their distance. Carry joins a zone machine with machines for these: its states know the
// panel of the latest point (a zone, or a part of one), and its letters say where the next point lies, on which side of
// the latest one and how far away. The place of the latest point inside its panel is carried by package forward.
//
// The meaning of every rule is that of judge number 1 in package rules: strict comparisons, the newest point beyond the
// line itself, windows that may hold fewer points than m. Where a machine would need more than StatesMax states
// or TransitionsMax transitions ErrTooLarge says so; Work bounds the time.
package automaton
