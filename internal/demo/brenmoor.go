package demo

import (
	"math"

	pb "limitary/api/limitary/v1"
)

// brenmoor tells the stories of the laboratory at Brenmoor: lead at the low end, turbidity, microbiology and pH.
func brenmoor() []Story {
	return []Story{turbidityHigh(), turbidityLog(), colonies(), referenceColonies(), platesFailed(), ph(), leadLow()}
}

var brenmoorAnalysts = []string{"D.W.", "S.E.", "P.L."}

// turbidityHigh had provisional limits from ten days first, and better ones later. One result was posted twice.
func turbidityHigh() Story {
	c := chartOf("brenmoor", "turbidity-5", "Turbidity, formazin 5 NTU", xbarR, 4, "NTU", "nephelometry", "TB2", "turbidity", day)
	s := &series{
		chart: c, prefix: "BR-TURB", stream: 21, source: "lims-brenmoor", instrument: "TB2", analysts: brenmoorAnalysts, position: 1,
		material: "Formazin suspension 5 NTU", perDay: 1, days: 160, decimals: 2, centre: 5.03, between: 0.02, within: 0.07, setup: 10,
	}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 10),
		propose(s, proposal{number: 1, from: 0, to: 10, effective: 10, location: setOf("western-electric-1956"), dispersion: setOf("shewhart-1931"),
			reason: "First limits, provisional, from ten days.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 10, 50),
		settle(s, noCause, chance),
		propose(s, proposal{number: 2, from: 0, to: 50, effective: 50, location: nelsonForMonitoring(), dispersion: setOf("shewhart-1931"),
			reason: "Limits from 50 days replace the provisional ones.", instructions: houseRules()}),
		approve(c, 2, ""),
		post(s, 50, 100),
		postAgain(s, 99),
		post(s, 100, s.count()),
		settle(s, noCause, chance),
	}}
}

// turbidityLog is judged on a log scale: so near to zero the readings are skewed, and dust only ever adds to them.
func turbidityLog() Story {
	c := chartOf("brenmoor", "turbidity-low", "Turbidity, low-level standard 0.1 NTU", individuals, 1, "NTU", "nephelometry", "TB3", "turbidity", day)
	s := &series{
		chart: c, prefix: "BR-TURBL", stream: 177, source: "lims-brenmoor", instrument: "TB3", analysts: brenmoorAnalysts, position: 1,
		material: "Low-level standard 0.1 NTU", perDay: 1, days: 110, centre: math.Log(0.104), between: 0.24, write: fromLog(3), setup: 50,
	}
	const dusty = 92
	s.moves = []move{once(dusty, 1.1)}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 50),
		propose(s, proposal{number: 1, from: 0, to: 50, effective: 50, location: setOf("run-of-seven"), dispersion: movingRange(),
			options: &pb.KindOptions{Transform: &pb.Transform{Kind: pb.TransformKind_TRANSFORM_KIND_LOG}},
			reason: "Set-up from 50 days on a log scale: near zero the readings reach further up than down. Lines of the plain readings would both " +
				"lie too low, so that sound readings passed the upper one and a fall did not pass the lower.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 50, dusty+1),
		settle(s, assignableCause, "Cuvette scratched; discarded. Run repeated with a new one."),
		post(s, dusty+1, s.count()),
	}}
}

// colonies is a young chart with provisional limits.
func colonies() Story {
	c := chartOf("brenmoor", "colonies-22c", "Colony count at 22 °C, reference suspension, log10", individuals, 1, "log10 CFU/mL", "pour-plate", "INC3", "colony-count", day)
	s := &series{
		chart: c, prefix: "BR-HPC22", stream: 22, source: "lims-brenmoor", instrument: "INC3", analysts: brenmoorAnalysts, position: 1,
		lot: "RS-12", material: "Reference suspension", perDay: 1, days: 45, decimals: 2, centre: 1.93, between: 0.09, setup: 15,
	}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 15),
		propose(s, proposal{number: 1, from: 0, to: 15, effective: 15, location: setOf("run-of-seven"), dispersion: movingRange(),
			reason: "First limits from 15 plates, provisional.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 15, s.count()),
	}}
}

// referenceColonies counts a reference suspension by itself. So few colonies come in whole steps and lean upwards, so its
// lines are whole counts. One vial gave hardly any.
func referenceColonies() Story {
	c := chartOf("brenmoor", "ecoli-reference", "E. coli, reference suspension, colonies in 100 mL", counts, 1, "1", "membrane-filtration", "INC4", "e-coli", day)
	s := &series{
		chart: c, prefix: "BR-ECREF", stream: 133, source: "lims-brenmoor", instrument: "INC4", analysts: brenmoorAnalysts, position: 1,
		lot: "EC-08", material: "Reference suspension of E. coli", perDay: 1, days: 100, centre: 16, counted: colonyCount, setup: 40,
	}
	const thawed = 74
	s.moves = []move{once(thawed, -14.5)}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 40),
		propose(s, proposal{number: 1, from: 0, to: 40, effective: 40, location: own(beyond("count", stop, 1, 1, 3)), options: exactLines(),
			reason: "Set-up from 40 filters. A chart of counts, with its lines at whole counts that chance passes on each side in " +
				"at most 1.35 of 1,000 filters.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 40, thawed+1),
		settle(s, assignableCause, "The vial had stood thawed overnight. Discarded; the filters of the day were set up again with a fresh one."),
		post(s, thawed+1, s.count()),
	}}
}

// platesFailed sums up the microbiology section week by week: how many of its plates could not be used. In one week an
// incubator ran too warm.
func platesFailed() Story {
	c := chartOf("brenmoor", "plates-failed", "Microbiology, fraction of plates failed, by week", fraction, 1, "1", "plate-inspection", "INC3", "failed-plates", week)
	s := &series{
		chart: c, prefix: "BR-PLATE", stream: 163, source: "lims-brenmoor", instrument: "INC3", analysts: brenmoorAnalysts,
		material: "All plates of the week", perDay: 1, days: 56, every: 7, centre: 0.045, counted: items(40, 120), setup: 30,
	}
	const warm = 45
	s.moves = []move{once(warm, 0.20)}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 30),
		propose(s, proposal{number: 1, from: 0, to: 30, effective: 30, location: own(beyond("plates", stop, 1, 1, 3)), options: exactLines(),
			reason: "Set-up from 30 weeks. With 40 to 120 plates a week hardly more than a few fail, so the line of each week is the whole number of " +
				"plates that its own number of plates gives.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 30, warm+1),
		settle(s, assignableCause, "Incubator INC3 ran 2 °C too warm from Friday night on; plates overgrown. Thermostat replaced, samples taken again."),
		post(s, warm+1, s.count()),
	}}
}

// ph is posted to and has no limits yet: nothing is judged, and nothing is clear.
func ph() Story {
	c := chartOf("brenmoor", "ph-buffer-7", "pH, buffer 7.00", individuals, 1, "1", "electrometry", "PH4", "ph", day)
	s := &series{
		chart: c, prefix: "BR-PH7", stream: 23, source: "lims-brenmoor", instrument: "PH4", analysts: brenmoorAnalysts, position: 1,
		lot: "BF-3", material: "Buffer pH 7.00", perDay: 1, days: 50, decimals: 3, centre: 7.004, between: 0.011, setup: 50,
	}
	return Story{c, []step{createChart(c), post(s, 0, s.count())}}
}

// leadLow ends with a STOP: the control failed in the last run but one, its repeat was in order, and the track is on hold
// until somebody releases it.
func leadLow() Story {
	c := chartOf("brenmoor", "lead-icpms-low", "Lead, check standard 1 µg/L", individuals, 1, "µg/L", icpms, "MS2", "lead", halfDay)
	s := &series{
		chart: c, prefix: "BR-PBLOW", stream: 84, source: "lims-brenmoor", instrument: "MS2", analysts: brenmoorAnalysts, position: 1,
		lot: "PL-33", material: "Lead check standard 1 µg/L", perDay: 2, days: 180, decimals: 3, centre: 1.006, between: 0.031, setup: 40,
	}
	failed := s.count() - 2
	s.moves = []move{once(failed, 0.19)}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 40),
		propose(s, proposal{number: 1, from: 0, to: 40, effective: 40, location: setOf("harmonised-1995"), dispersion: movingRange(),
			reason: "Set-up from 40 runs.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 40, 200),
		settle(s, noCause, chance),
		post(s, 200, failed),
		settle(s, noCause, chance),
		post(s, failed, failed+1),
		repeat(s, failed, "1.012"),
		post(s, failed+1, s.count()),
	}}
}
