package measure

import "math"

// mostReplications ends the search for a number of replications.
const mostReplications = 1 << 30

// Replications returns the least number of replications, not below len(x), for
// which the interval of the mean is expected to be at most half wide to each
// side, with the variance of the pilot x; ok is false when x has fewer than
// two values, half is not positive, or more than 2^30 are needed.
//
// Source: A. M. Law, Simulation Modeling and Analysis, ch. 9 (specified
// precision).
func Replications(x []float64, half, level float64) (n int, ok bool) {
	q := upperTail(level)
	if len(x) < 2 || !(half > 0) {
		return 0, false
	}
	_, variance := meanVariance(x)
	wide := func(n int) bool {
		return TQuantile(q, float64(n-1))*math.Sqrt(variance/float64(n)) > half
	}
	low, high := len(x)-1, len(x) // low is too few, or not asked about
	for wide(high) {
		if high >= mostReplications {
			return 0, false
		}
		low, high = high, 2*high
	}
	for low+1 < high {
		if mid := low + (high-low)/2; wide(mid) {
			low = mid
		} else {
			high = mid
		}
	}
	return high, true
}

// RelativeHalf returns the half-width at which to stop so that the relative
// error of the mean, as estimated, is at most gamma of the true one:
//
//	|mean| · γ/(1+γ).
//
// Source: A. M. Law and W. D. Kelton, sequential procedure for a relative
// error.
func RelativeHalf(mean, gamma float64) float64 {
	return float64(math.Abs(mean) * (gamma / (1 + gamma)))
}

// SequentialSize returns the mean number of values, for many of them, at which
// a fixed half-width is reached with standard deviation s: (z·s/half)².
//
// Source: Y. S. Chow and H. Robbins, "On the asymptotic theory of fixed-width
// sequential confidence intervals for the mean", Ann. Math. Statist. 36, 1965.
func SequentialSize(s, half, level float64) float64 {
	r := NormalQuantile(upperTail(level)) * s / half
	return float64(r * r)
}

// Batches is a mean from one long run cut into batches of equal size.
type Batches struct {
	Interval         // of the batch means, N of them
	Size     int     // values in a batch
	Left     int     // values at the end that fill no batch; not used
	Lag1     float64 // lag-1 autocorrelation of the batch means; NaN if undefined
}

// BatchMeans cuts x into n batches and treats their means as independent. That
// holds only for batches long against the correlation of x: a Lag1 far from 0
// says they are too short, and the interval too narrow. It panics if n < 2.
// With fewer values than n there is no batch.
//
// Source: A. M. Law, Simulation Modeling and Analysis, ch. 9.
func BatchMeans(x []float64, n int, level float64) Batches {
	if n < 2 {
		panic("measure: fewer than two batches")
	}
	size := len(x) / n
	if size == 0 {
		return Batches{Interval: MeanInterval(nil, level), Left: len(x), Lag1: math.NaN()}
	}
	means := blockMeans(x[:size*n], size)
	return Batches{MeanInterval(means, level), size, len(x) - size*n, Lag1(means)}
}

// blockMeans returns the means of consecutive whole blocks of x.
func blockMeans(x []float64, size int) []float64 {
	means := make([]float64, len(x)/size)
	for i := range means {
		means[i], _ = meanVariance(x[i*size : (i+1)*size])
	}
	return means
}

// Lag1 returns the lag-1 autocorrelation of x; NaN if x is constant.
//
//	Σ (x[i]-m)(x[i+1]-m) / Σ (x[i]-m)²
func Lag1(x []float64) float64 {
	if allEqual(x) {
		return math.NaN()
	}
	mean, _ := meanVariance(x)
	var over, under float64
	for i, v := range x {
		under += float64((v - mean) * (v - mean))
		if i > 0 {
			over += float64((x[i-1] - mean) * (v - mean))
		}
	}
	return over / under
}

// MSERBlock is the number of values in a block of [MSER5].
const MSERBlock = 5

// MSER5 returns how many of the first values of x belong to the warm-up, by
// the truncation that makes the standard error of the rest least, judged on
// means of blocks of five. Only the first half of the blocks may go; settled
// is false when the least is at that limit, or there are fewer than four
// blocks: then the run is too short to tell.
//
// Sources: K. P. White, "An effective truncation heuristic for bias reduction
// in simulation output", Simulation 69, 1997; W. W. Franklin and K. P. White,
// Winter Simulation Conference, 2008.
func MSER5(x []float64) (drop int, settled bool) {
	d, _, settled := MSER(blockMeans(x, MSERBlock))
	return d * MSERBlock, settled
}

// MSER returns the number d of leading values of z, at most half of them, that
// makes the statistic
//
//	Σ_{i>d} (z[i]-m)² / (n-d)²,  m the mean of those kept,
//
// least, the fewest if several do, and that least value; NaN if z is empty.
// settled is as for [MSER5]. The time complexity is O(n).
func MSER(z []float64) (d int, lowest float64, settled bool) {
	n := len(z)
	lowest = math.NaN()
	var mean, squares float64 // of the values from i on, by Welford's update
	for i := n - 1; i >= 0; i-- {
		kept := float64(n - i)
		delta := z[i] - mean
		mean += delta / kept
		squares += float64(delta * (z[i] - mean))
		if i > n/2 {
			continue
		}
		if v := squares / (kept * kept); i == n/2 || v <= lowest {
			d, lowest = i, v
		}
	}
	return d, lowest, n >= 4 && d < n/2
}

// MovingAverage smooths x, an average over replications, for the eye to find
// where a warm-up ends: value i is the mean of the 2w+1 values around it, of
// 2i+1 near the beginning, and the last w are left out. It panics if w < 0.
//
// Source: P. D. Welch, "The statistical analysis of simulation results", in
// The Computer Performance Modeling Handbook, 1983.
func MovingAverage(x []float64, w int) []float64 {
	if w < 0 {
		panic("measure: window below zero")
	}
	out := make([]float64, max(0, len(x)-w))
	for i := range out {
		r := min(i, w)
		out[i], _ = meanVariance(x[i-r : i+r+1])
	}
	return out
}
