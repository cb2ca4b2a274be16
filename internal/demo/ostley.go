package demo

import (
	"time"

	pb "limitary/api/limitary/v1"
)

// ostley tells the stories of the laboratory at Ostley: lead by ICP-MS, fluoride by ion-selective electrode and
// sulfate by ion chromatography.
func ostley() []Story {
	return []Story{leadMid(), leadRecovery(), fluoride(), sulfateRuns()}
}

var ostleyAnalysts = []string{"B.F.", "R.N."}

const icpms = "icp-ms"

// leadMid has a track for each lot of the check standard. The second lot drifts at its end.
func leadMid() Story {
	c := chartOf("ostley", "lead-icpms-mid", "Lead, check standard 10 µg/L", individuals, 1, "µg/L", icpms, "MS1", "lead", day)
	c.LotsAreTracks = true
	old := &series{
		chart: c, prefix: "OS-PB118", stream: 11, source: "lims-ostley", instrument: "MS1", analysts: ostleyAnalysts, position: 1,
		lot: "PB-118", material: "Lead check standard 10 µg/L", perDay: 1, days: 110, ago: 70, decimals: 2, centre: 10.06, between: 0.17, setup: 30,
	}
	fresh := *old
	fresh.prefix, fresh.stream, fresh.lot = "OS-PB119", 12, "PB-119"
	fresh.days, fresh.ago, fresh.setup, fresh.overlap = 95, 0, 0, 25
	fresh.position, fresh.centre = 2, 9.97
	const drifts = 74
	fresh.moves = []move{drift(drifts, 0.016)}
	rules := func() *pb.TraceRules {
		return own(beyond("run-of-seven/1", stop, 1, 1, 3), sameSide("run-of-seven/2", act, 7), trend("run-of-seven/3", act, 7), ewma("ewma-0.2", act, 0.2, 2.86))
	}
	return Story{c, []step{
		createChart(c),
		post(old, 0, 30),
		propose(old, proposal{number: 1, from: 0, to: 30, effective: 30, location: rules(), dispersion: movingRange(),
			reason: "Set-up of lot PB-118 from 30 runs.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(old, 30, old.count()),
		settle(old, noCause, chance),
		post(&fresh, 0, 25),
		propose(&fresh, proposal{number: 2, from: 0, to: 25, effective: 25, location: rules(), dispersion: movingRange(),
			reason: "Lot PB-119 from 25 runs measured beside lot PB-118.", instructions: houseRules()}),
		approve(c, 2, ""),
		post(&fresh, 25, drifts),
		settle(&fresh, noCause, chance),
		post(&fresh, drifts, fresh.count()),
		note(&fresh, "Rising since the cones were cleaned? Internal standard recovery is being checked."),
	}}
}

// leadRecovery is judged by a criterion of the method as well as by what the process does. One spike failed, and its track
// was released; a request to void a later one, which would take its signal away, waits for another person.
func leadRecovery() Story {
	c := chartOf("ostley", "lead-icpms-recovery", "Lead, spike recovery in tap water", individuals, 1, "%", icpms, "MS1", "lead", day)
	s := &series{
		chart: c, prefix: "OS-PBREC", stream: 13, source: "lims-ostley", instrument: "MS1", analysts: ostleyAnalysts, position: 3,
		material: "Tap water spiked with 5 µg/L", perDay: 1, days: 150, decimals: 1, centre: 99.2, between: 3.1, setup: 40,
	}
	const failed, double = 118, 146
	s.moves = []move{once(failed, -21), once(double, 7.5)}
	criterion := &pb.FixedLines{
		LowerAction: fixedLine(85, pb.Basis_BASIS_METHOD_CRITERION), UpperAction: fixedLine(115, pb.Basis_BASIS_METHOD_CRITERION),
	}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 40),
		propose(s, proposal{number: 1, from: 0, to: 40, effective: 40, location: setOf("action-warning"), dispersion: movingRange(), locationLines: criterion,
			reason: "Warning lines from 40 spikes; the action lines are the recovery the method asks for, 85 to 115 % (an invented figure).", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 40, failed),
		settle(s, noCause, chance),
		post(s, failed, failed+1),
		repeat(s, failed, "98.1"),
		settle(s, assignableCause, "Spike pipetted from the wrong flask; seen in the worksheet. Run repeated with a new spike."),
		post(s, failed+1, s.count()),
		void(s, double, "SPIKE_ERROR", "The spike may have been pipetted a little high; the pipette was found out of tolerance later that week."),
	}}
}

// fluoride is the busiest chart. A transcription error was voided by request and confirmation.
func fluoride() Story {
	c := chartOf("ostley", "fluoride-ise", "Fluoride, check standard 1 mg/L", individuals, 1, "mg/L", "ion-selective-electrode", "ISE1", "fluoride", 8*time.Hour)
	s := &series{
		chart: c, prefix: "OS-FISE", stream: 14, source: "lims-ostley", instrument: "ISE1", analysts: ostleyAnalysts, position: 1,
		lot: "FL-07", material: "Fluoride check standard 1 mg/L", perDay: 3, days: 180, decimals: 3, centre: 1.003, between: 0.016, setup: 60,
	}
	const slip = 301
	s.moves = []move{once(slip, 9.0)}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 60),
		propose(s, proposal{number: 1, from: 0, to: 60, effective: 60, location: setOf("nordic-handbook"), dispersion: movingRange(),
			reason: "Set-up from 60 runs over 20 days.", instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 60, slip+1),
		void(s, slip, "TRANSCRIPTION", "The decimal point slipped when the result was typed in; the worksheet has the right one."),
		confirm(s, slip, "Worksheet seen."),
		settle(s, assignableCause, "Transcription error, voided by request and confirmation."),
		post(s, slip+1, 480),
		settle(s, noCause, chance),
		post(s, 480, s.count()),
	}}
}

// sulfateRuns has three check standards in each run. Runs differ by their calibrations, which the scatter within a run does
// not show: limits of subgroup means would be too narrow.
func sulfateRuns() Story {
	c := chartOf("ostley", "sulfate-ic3-runs", "Sulfate, check standard 50 mg/L, mean of the run", runMeans, 3, "mg/L", ic, "IC3", "sulfate", day)
	s := &series{
		chart: c, prefix: "OS-SO4", stream: 174, source: "lims-ostley", instrument: "IC3", analysts: ostleyAnalysts, position: 1,
		lot: "SS-21", material: "Sulfate check standard 50 mg/L", perDay: 1, days: 100, decimals: 2, centre: 50.1, between: 0.42, within: 0.30, setup: 40,
	}
	const eluent = 83
	s.moves = []move{once(eluent, -2.4)}
	return Story{c, []step{
		createChart(c),
		post(s, 0, 40),
		propose(s, proposal{number: 1, from: 0, to: 40, effective: 40,
			location: own(beyond("run-mean", stop, 1, 1, 3), sameSide("run-mean-side", act, 9)), dispersion: own(beyond("within-run", act, 1, 1, 3)),
			reason: "Set-up from 40 runs of three check standards. Every run has its own calibration, so run means vary more than the readings of one run " +
				"explain. Lines of an xbar chart rest on the scatter within runs alone: about one run in four would be beyond them with nothing wrong.",
			instructions: houseRules()}),
		approve(c, 1, ""),
		post(s, 40, eluent+1),
		settle(s, assignableCause, "Eluent made up too strong; sulfate came early and lost part of its peak. New eluent, run repeated."),
		post(s, eluent+1, s.count()),
	}}
}
