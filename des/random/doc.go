// Package random holds every source of chance in a run: keyed draws,
// sequential streams, and the laws that scenarios name.
//
// A keyed draw ([Draw]) is a pure function of (seed, name, index, quantity).
// It belongs to what it is about and not to when it is asked for, so two
// variants of one network that ask in different orders meet the same chance.
// A [Stream] is a sequential generator for quantities whose consumption does
// not depend on the network, such as the gaps of an open-loop source. It is a
// plain value: copying it clones it, and two copies go on identically.
//
// The bits of draws and streams are the same on every platform. Laws also use
// the exponential and logarithm of package math, and [Gamma] the methods of
// distuv, whose last digit may differ between processor architectures.
//
// Nothing here is global, starts a goroutine or reads a clock. Draws allocate
// nothing.
package random
