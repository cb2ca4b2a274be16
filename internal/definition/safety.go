package definition

// SafetyText goes with every explanation, export and page: what the answers are, and what they are not.
const SafetyText = "A signal is statistical evidence about the measuring process, not a compliance, release or safety decision. " +
	"A clear standing does not mean that the result is right, and silence proves nothing for runs not posted. " +
	"Control limits are not specification or legal limits unless marked method criterion or target, and are never compared with customer samples. " +
	"The accredited method, the regulator's programme, statutory requirements and the laboratory's quality manual take precedence. " +
	"Results tied to an unresolved control failure may not be usable to show compliance. " +
	"Decisions to release, withhold, recall or resume belong to authorised, licensed or competent people. " +
	"No answer from the service means not judged. " +
	"False alarms are expected; a rate shown is the nominal one. " +
	"Validate before use. Not for patient results, closed-loop control or life protection."
