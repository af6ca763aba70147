// Package progress reads a course: the exams of one animal, in order, and what they say
// together about each segment of the cord, each limb and the whole animal; whether a
// change is real or exam noise; and what may be expected in the coming weeks.
//
// The model is a hidden Markov chain. A lesion has a place, which the visits share, and a
// severity, which moves between them at rates that depend on whether the animal is
// recovering fast or slowly, holding steady or getting worse. Visits may come at any
// times. At a small hazard the severity jumps up (a relapse), and at a smaller one a lesion
// arises at another place. Every place is weighed by all that was seen at all visits.
// The sums are exact: forward–backward over every place, severity and pace.
//
// Treatments and events are never part of the model: a course shows what changed, not why.
//
// A Course keeps what it has computed. Adding today's visit costs one forward step, and
// goes back over the past only as far as today still changes what is known of it.
package progress
