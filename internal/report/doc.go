// Package report writes the answers of the command line as plain text that can be pasted into a report.
//
// A Text is a sequence of sections, aligned pairs, tables and paragraphs, all of it readable in a fixed-width font and
// without colour. On it stand the reports themselves: Limits, Judged and Validation. Every figure in them is followed by
// what it rests on. Numbers have a decimal point and no thousands separator, so that they can be copied into a
// computation.
//
// Texts that come from a file of results are data, not layout: control characters in them are replaced before they reach
// a terminal, and long ones are cut.
package report

// Safety is what every answer says of itself.
const Safety = "A signal is statistical evidence about the measuring process, not a compliance, release or safety decision. " +
	"A clear standing does not mean that a result is right, not judged is never clear, and silence proves nothing for results " +
	"that are not in the file. Control limits are not specification or legal limits unless marked method criterion or target, " +
	"and are never compared with customer samples. The accredited method, the regulator's programme and the laboratory's " +
	"quality manual take precedence. False alarms are expected. Validate before use; not for patient results, closed-loop " +
	"control or life protection."
