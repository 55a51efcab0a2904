// Package study runs scenarios and says what came of it: one replication
// ([Run]), many ([Batch]), plans beside a base on the same seeds ([Compare]),
// and what can be said before anything runs ([Check]).
//
// This is the only package below the program that starts goroutines: the
// replications of a study, and the regions of one run, are spread over cores
// here. Results land by index, so they are the same on any number of cores.
// When a context ends first, a study returns what is known by then, marked
// partial, together with the error of the context.
//
// Confidence intervals are those of Student's t over independent replications,
// at 95 %; differences are paired by seed, for under one seed every plan meets
// the same traffic.
package study
