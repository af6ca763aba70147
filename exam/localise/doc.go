// Package localise says where in the nervous system a lesion lies: it weighs every explanation
// of an exam that it knows (a lesion of the cord at each segment, of roots, plexus, nerves,
// cauda equina, of all lower motor neurons, of the brain; painful places; joints, tendons,
// blood supply, drugs; nothing at all; two lesions at once) by the laws of probability.
//
// A hypothesis damages elements of the anatomy (package anatomy). From the damage follow, for
// each test, the loss of its arc, of control from above, of the ascending path, and pain; from
// these the chance of each grade. All hypotheses are summed exactly, none is sampled, and the
// same exam gives the same bits on every machine.
//
// It supports and never replaces a veterinarian.
package localise
