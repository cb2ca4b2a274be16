package demo

// brenmoor tells the stories of the laboratory at Brenmoor: lead at the low end, turbidity, colony counts and pH.
func brenmoor() []Story {
	return []Story{turbidityHigh(), colonies(), ph(), leadLow()}
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
