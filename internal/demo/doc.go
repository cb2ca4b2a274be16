// Package demo loads an invented group of drinking-water laboratories, Fellmark Water, into a Limitary service: charts,
// set-up data, versions of limits with their approvals, half a year of control results with something happening in
// them (a year where they are weekly), and what people decided on it.
//
// Everything is invented. The numbers come from a generator with a fixed seed, people are initials or roles, and the
// figures (centres, sigmas, criteria) are chosen to look plausible; none is taken from a method, a rule book or a
// laboratory. Noise of readings is cut at 2.6 standard deviations, so that the events of the story stand out; chance still
// raises a signal now and then, as it does in any laboratory.
//
// [Load] goes through the API alone, as clients do, under the keys of five principals. It is repeatable: names, request
// ids and the ids of results are always the same, and the moment that all times hang on is read back from the first
// result that was posted. So a load that was cut off goes on where it was when it is started again, and one that is
// complete changes nothing.
//
// The files are the laboratories: each describes its charts, how their results come about, and the story of each
// chart as a list of steps.
package demo
