// Package measure turns what a run sees into figures: histograms and exact
// moments of delays, streaming meters of variation, order and loss, time
// averages, and the statistics over replications that say whether a
// difference is real.
//
// Meters are values: one call per delivered packet, no allocation once they
// are warm, no clock of their own. A meter that holds no pointer is cloned by
// assignment; [Hist] has a Clone method. Meters that count are integers, so
// merging them is exact and does not depend on the order. Nothing here draws
// random numbers, and nothing may be shared between goroutines.
//
// Quantiles of distributions come from gonum, whose products are not pinned
// against fused multiply-add: the last digits of half-widths and p values may
// differ between processor architectures, those of the meters do not.
package measure
