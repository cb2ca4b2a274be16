package track_test

import "testing"

// seven gives a bench with results 1 to 7, all on the upper side, at minutes 10 to 70: one episode with hits at 3 to 7.
func seven(t *testing.T) *bench {
	b := newBench(t, location(threeOnASide))
	b.series(10, "10.5", "10.5", "10.5", "10.5", "10.5", "10.5", "10.5")
	b.wantSignals("1 OPEN 1: 3-7")
	return b
}

// split gives the bench of seven with a late result 8 on the other side between 4 and 5.
func split(t *testing.T) *bench {
	b := seven(t)
	b.do(op{kind: post, rows: []row{b.row(45, "9.5")}})
	b.wantSignals("1 OPEN 1: 3-4", "2 OPEN 5: 7-7")
	return b
}

func TestEpisodes(t *testing.T) {
	high := row{readings: []string{"11"}}
	low := row{readings: []string{"9"}}

	t.Run("grows with every hit and keeps its id", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "10.5", "10.5", "10.5")
		b.wantTold("1 OPENED")
		b.series(40, "11")
		b.wantTold("1 CHANGED")
		b.wantSignals("1 OPEN 1: 3-4")
	})
	t.Run("a point without the hit ends it and the next is another", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11", "11", "9", "11", "11", "11")
		b.wantSignals("1 OPEN 1: 3-3", "2 OPEN 5: 7-7")
	})
	t.Run("is split by a late result, the earlier part keeping the id", func(t *testing.T) {
		b := split(t)
		b.wantTold("1 CHANGED", "2 OPENED")
	})
	t.Run("merges into the oldest when the result between is amended", func(t *testing.T) {
		b := split(t)
		b.do(op{kind: amendReadings, n: 8, row: high})
		b.wantTold("1 CHANGED", "2 MERGED")
		b.wantSignals("1 OPEN 1: 3-7", "2 MERGED into 1")
	})
	t.Run("merges when the result between is voided", func(t *testing.T) {
		b := split(t)
		b.do(op{kind: void, n: 8})
		b.wantSignals("1 OPEN 1: 3-7", "2 MERGED into 1")
	})
	t.Run("merges when the result between becomes a repeat", func(t *testing.T) {
		b := split(t)
		b.do(op{kind: amendRole, n: 8})
		b.wantSignals("1 OPEN 1: 3-7", "2 MERGED into 1")
	})
	t.Run("merges when the result between moves to the end", func(t *testing.T) {
		b := split(t)
		b.do(op{kind: amendTime, n: 8, row: row{minute: 90}})
		b.wantSignals("1 OPEN 1: 3-7", "2 MERGED into 1")
	})
	t.Run("merges into the oldest though it is the later one", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(50, "9", "11", "11", "11") // 1 to 4
		b.series(10, "11", "11", "11")      // 5 to 7, before them
		b.wantSignals("1 OPEN 2: 4-4", "2 OPEN 5: 7-7")
		b.do(op{kind: void, n: 1})
		b.wantTold("1 CHANGED", "2 MERGED")
		b.wantSignals("1 OPEN 5: 7-4", "2 MERGED into 1")
	})
	t.Run("three merge into the oldest", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11", "11", "9", "11", "11", "11", "9", "11", "11", "11")
		b.wantSignals("1 OPEN 1: 3-3", "2 OPEN 5: 7-7", "3 OPEN 9: 11-11")
		b.do(op{kind: amendReadings, n: 4, row: high})
		b.do(op{kind: amendReadings, n: 8, row: high})
		b.wantSignals("1 OPEN 1: 3-11", "2 MERGED into 1", "3 MERGED into 1")
	})
	t.Run("is retracted when no hit is left", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11", "11")
		b.do(op{kind: amendReadings, n: 2, row: low})
		b.wantTold("1 RETRACTED")
		b.wantSignals("1 RETRACTED")
	})
	t.Run("comes back under a new id", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11", "11")
		b.do(op{kind: amendReadings, n: 2, row: low})
		b.do(op{kind: amendReadings, n: 2, row: high})
		b.wantSignals("1 RETRACTED", "2 OPEN 1: 3-3")
	})
	t.Run("loses its last hit and keeps the rest", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: void, n: 7})
		b.wantTold("1 CHANGED")
		b.wantSignals("1 OPEN 1: 3-6")
	})
	t.Run("loses its first hit and keeps the rest", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: void, n: 1})
		b.wantSignals("1 OPEN 2: 4-7")
	})
	t.Run("follows its first point to another place", func(t *testing.T) {
		b := newBench(t, location(threeOnASide))
		b.series(10, "11", "11", "11")
		b.do(op{kind: amendTime, n: 1, row: row{minute: 5}})
		b.wantTold("1 CHANGED")
		if got, want := b.track("").signals[1].FirstPoint.At, at(5); !got.Equal(want) {
			t.Errorf("first point at %v, want %v", got, want)
		}
	})
	t.Run("is not told of where nothing of it changes", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: amendReadings, n: 5, row: high})
		b.wantTold()
		b.do(op{kind: post, rows: []row{b.row(80, "9")}})
		b.wantTold()
		b.do(op{kind: post, rows: []row{b.row(5, "9")}})
		b.wantTold()
	})
}

func TestEpisodesAfterClosing(t *testing.T) {
	t.Run("one that changes stays closed and is marked", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: closeSignal})
		b.wantSignals("1 CLOSED 1: 3-7")
		b.series(80, "11")
		b.wantSignals("1 CLOSED 1: 3-8 changed after closing")
	})
	t.Run("one that is split stays closed and the rest is open", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: closeSignal})
		b.do(op{kind: post, rows: []row{b.row(45, "9.5")}})
		b.wantSignals("1 CLOSED 1: 3-4 changed after closing", "2 OPEN 5: 7-7")
	})
	t.Run("one that merges or is retracted is marked", func(t *testing.T) {
		b := split(t)
		b.do(op{kind: closeSignal, n: 1})
		b.do(op{kind: void, n: 8})
		b.wantSignals("1 OPEN 1: 3-7", "2 MERGED into 1 changed after closing")
		b.do(op{kind: closeSignal})
		for n := 3; n <= 7; n++ {
			b.do(op{kind: void, n: n})
		}
		b.wantSignals("1 RETRACTED changed after closing", "2 MERGED into 1 changed after closing")
	})
	t.Run("one that stands is not marked", func(t *testing.T) {
		b := seven(t)
		b.do(op{kind: closeSignal})
		b.series(80, "9", "9")
		b.wantSignals("1 CLOSED 1: 3-7")
	})
}
