package demo

import (
	pb "limitary/api/limitary/v1"
)

// harwick tells the stories of the laboratory at Harwick: nitrate by ion chromatography and turbidity.
func harwick() []Story {
	return []Story{nitrateMid(), nitrateBlank(), nitrateDuplicates(), nitratePairs(), turbidityLow(), nitrateRetired()}
}

var harwickAnalysts = []string{"A.K.", "J.T.", "M.O."}

const ic = "ion-chromatography"

func nitrateSeries(c *pb.Chart, prefix string, stream uint64) *series {
	return &series{
		chart: c, prefix: prefix, stream: stream, source: "lims-harwick", instrument: "IC2", analysts: harwickAnalysts,
		perDay: 2, days: 180, decimals: 3,
	}
}

// nitrateMid is a year's ordinary chart: an excluded set-up result, chance signals that the reviewer works off, and at the
// end a new column, after which the process has moved. A new version waits for approval.
func nitrateMid() Story {
	c := chartOf("harwick", "nitrate-ic2-mid", "Nitrate, check standard 5 mg/L N", individuals, 1, "mg/L", ic, "IC2", "nitrate", halfDay)
	s := nitrateSeries(c, "HW-NO3M", 40)
	s.material, s.lot, s.position = "Nitrate check standard 5 mg/L N", "NS-41", 2
	s.centre, s.between, s.setup = 5.012, 0.058, 40
	const bubble, column = 17, 336
	s.moves = []move{once(bubble, 0.34), shift(column, 0.060)}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 40),
		propose(s, proposal{number: 1, from: 0, to: 40, effective: 40, location: nelsonForMonitoring(), dispersion: movingRange(),
			exclude: map[int]string{bubble: "Air in the sample loop, logged by the analyst at the time; the loop was primed again."},
			reason:  "Set-up of the chart from 40 runs on the new autosampler.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 40, 160),
		settle(s, noCause, chance),
		post(s, 160, column-4),
		settle(s, noCause, chance),
		mark(s, column, "Separator column changed, serial C-0817"),
		post(s, column-4, s.count()),
		note(s, "Began with the new column. Recalibrated twice, no change; a new version is proposed from the runs since."),
		propose(s, proposal{number: 2, from: column, to: s.count(), effective: s.count(), location: nelsonForMonitoring(), dispersion: movingRange(),
			afterSignal: true, reason: "New separator column: the mean has moved by one sigma and stayed, and the change test says CHANGE.", instructions: houseRules()}),
	}}
}

// nitrateBlank has less-than results: those at the reporting limit are clear by their bound, those of diluted runs prove
// nothing, and one blank was contaminated.
func nitrateBlank() Story {
	c := chartOf("harwick", "nitrate-ic2-blank", "Nitrate, laboratory blank", individuals, 1, "mg/L", ic, "IC2", "nitrate", halfDay)
	s := nitrateSeries(c, "HW-NO3B", 2)
	s.material, s.position = "Laboratory reagent water", 1
	s.centre, s.between = 0.018, 0.010
	const dirty = 251
	s.moves = []move{once(dirty, 0.075)}
	s.write = func(i int, x float64) string {
		switch {
		case i%23 == 11:
			return "<0.10" // a run diluted twice
		case x < 0.05:
			return "<0.05"
		}
		return fixed(x, 2)
	}
	return Story{c, []step{
		createChart(c),
		propose(s, proposal{number: 1, effective: 0, centre: ptr(0.02), sigma: ptr(0.01), decimals: ptr(int32(3)),
			locationLines: &pb.FixedLines{UpperAction: fixedLine(0.05, pb.Basis_BASIS_TARGET), LowerAction: absent(), LowerWarning: absent()},
			location:      own(aboveLine("blank/action", stop, pb.LineKind_LINE_KIND_ACTION)),
			reason:        "Blanks shall not exceed the reporting limit. Centre and sigma from the verification of the method.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 0, dirty+1),
		settle(s, assignableCause, "Eluent bottle rinsed with tap water. Bottle discarded, run repeated, samples of the run not reported."),
		post(s, dirty+1, s.count()),
	}}
}

// nitrateDuplicates has routine samples measured twice: their mean is the sample's affair, only their range is judged.
func nitrateDuplicates() Story {
	c := chartOf("harwick", "nitrate-ic2-duplicates", "Nitrate, duplicates of routine samples", xbarR, 2, "mg/L", ic, "IC2", "nitrate", day)
	s := nitrateSeries(c, "HW-NO3D", 3)
	s.material, s.position, s.perDay = "Treated water, routine sample", 3, 1
	s.centre, s.between, s.within, s.setup = 6.1, 0.6, 0.06, 30
	s.short = map[int]bool{122: true}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 30),
		propose(s, proposal{number: 1, from: 0, to: 30, effective: 30,
			dispersion: own(beyond("range", act, 1, 1, 3), sameSide("range-run", look, 9)),
			reason:     "Set-up from 30 duplicates. The means are those of the samples, so only the ranges are judged.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 30, 150),
		settle(s, noCause, chance),
		post(s, 150, s.count()),
	}}
}

// nitratePairs has duplicates of all kinds of water, whose difference grows with the concentration: the line goes by the
// band that the mean of a pair lies in. In one pair the second vial was that of another sample.
func nitratePairs() Story {
	c := chartOf("harwick", "nitrate-ic2-pairs", "Nitrate, duplicates of routine samples, 0.5 to 45 mg/L N", pairs, 2, "mg/L", ic, "IC2", "nitrate", day)
	s := nitrateSeries(c, "HW-NO3P", 246)
	s.material, s.position, s.perDay, s.days, s.decimals, s.setup = "Routine sample, raw or treated", 4, 1, 180, 2, 100
	s.level = oneOf([]float64{0.7, 1.6, 2.6, 5.2, 7.1, 8.8, 15, 18, 22, 32, 34, 37}, 0.08)
	s.spread = growing(0.03, 0.015)
	const swapped = 141
	s.apart = map[int]float64{swapped: 6.4}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 100),
		propose(s, proposal{number: 1, from: 0, to: 100, effective: 100, dispersion: own(beyond("pair", stop, 1, 1, 3)),
			options: &pb.KindOptions{BandFrom: []float64{0, 4, 12, 28}},
			reason: "Set-up from 100 duplicates. Two readings of 37 mg/L differ by more than two of 0.7 mg/L, so each of four bands of " +
				"concentration has its own line. There is no lower one: readings that agree well are no fault.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 100, swapped+1),
		settle(s, assignableCause, "The second vial was that of the next sample; both were measured again and agree. Run repeated."),
		post(s, swapped+1, s.count()),
	}}
}

// turbidityLow was judged from the beginning only in hindsight: its version was approved after 60 results, which were
// judged anew. One result came late. Later limits were proposed and rejected, as the change test found no difference that
// matters.
func turbidityLow() Story {
	c := chartOf("harwick", "turbidity-1", "Turbidity, formazin 1 NTU", xbarS, 3, "NTU", "nephelometry", "TB1", "turbidity", day)
	s := &series{
		chart: c, prefix: "HW-TURB", stream: 99, source: "lims-harwick", instrument: "TB1", analysts: harwickAnalysts,
		material: "Formazin suspension 1 NTU", perDay: 1, days: 180, decimals: 3, centre: 1.004, between: 0.003, within: 0.014, setup: 30,
	}
	c.RelevantShiftSigmas, c.RelevantSigmaRatio = 0.75, 1.5
	const late = 131
	return Story{c, []step{
		createChart(c),
		post(s, 0, 60),
		propose(s, proposal{number: 1, from: 0, to: 30, effective: 30, location: setOf("western-electric-1956"), dispersion: setOf("shewhart-1931"),
			reason: "Set-up from 30 days of three readings.", instructions: houseRules()}),
		approve(c, 1, "The chart was posted to before its limits were approved; the 30 days since the set-up are judged by them."),
		post(s, 60, 150, late),
		post(s, late, late+1),
		settle(s, noCause, chance),
		propose(s, proposal{number: 2, from: 30, to: 150, effective: 150, location: setOf("western-electric-1956"), dispersion: setOf("shewhart-1931"),
			reason: "Planned review: limits from the 120 days since the set-up. The change test says whether they are needed.", instructions: houseRules()}),
		reject(c, 2, "The change test says KEEP: the centre lies within 0.75 sigmas of the one in force and the scatter within a ratio of 1.5, which "+
			"is what matters on this chart. New limits would only take in what may have drifted."),
		post(s, 150, s.count()),
		settle(s, noCause, chance),
	}}
}

// nitrateRetired belongs to an instrument that is out of use.
func nitrateRetired() Story {
	c := chartOf("harwick", "nitrate-ic1-mid", "Nitrate, check standard 5 mg/L N (IC1, retired)", individuals, 1, "mg/L", ic, "IC1", "nitrate", day)
	s := nitrateSeries(c, "HW-NO3R", 14)
	s.instrument, s.material, s.lot, s.position = "IC1", "Nitrate check standard 5 mg/L N", "NS-40", 2
	s.perDay, s.days, s.ago, s.centre, s.between, s.setup = 1, 60, 120, 4.981, 0.071, 30
	return Story{c, []step{
		createChart(c),
		post(s, 0, 30),
		propose(s, proposal{number: 1, from: 0, to: 30, effective: 30, location: setOf("shewhart-1931"), dispersion: movingRange(),
			reason: "Set-up from 30 runs.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 30, s.count()),
		settle(s, noCause, chance),
		archive(c, "IC1 was taken out of use; nitrate runs on IC2."),
	}}
}
