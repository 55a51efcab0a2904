package theory

import "math"

// A PriorityClass is one class of a queue with Poisson arrivals: its rate and
// the first two moments of its service time.
type PriorityClass struct{ Lambda, S1, S2 float64 }

// residual returns the mean work in service that an arrival finds,
// sum(lambda S2)/2, and the load of the classes up to and with each.
func residual(classes []PriorityClass) (w0 float64, upTo []float64) {
	upTo = make([]float64, len(classes))
	load := 0.0
	for i, c := range classes {
		need(c.Lambda >= 0 && c.S1 >= 0 && c.S2 >= 0, "a class needs a rate and moments at or above 0")
		w0 += float64(c.Lambda*c.S2) / 2
		load += float64(c.Lambda * c.S1)
		upTo[i] = load
	}
	return w0, upTo
}

// PriorityWaits returns the mean wait of each class, highest first, at a server
// that finishes what it began and then takes the first of the highest class:
// W0/((1-s(k-1))(1-s(k))), W0 = sum(lambda S2)/2, s(k) the load of the classes
// down to k. A class with s(k) >= 1 gets +Inf. The waits of the classes above
// an overloaded one are then upper bounds, as W0 counts all of its packets and
// not only those that are served. It panics on negative parameters.
//
// Source: A. Cobham, "Priority assignment in waiting line problems", J. Oper.
// Res. Soc. America 2 (1954).
func PriorityWaits(classes []PriorityClass) []float64 {
	w0, upTo := residual(classes)
	waits := make([]float64, len(classes))
	above := 0.0
	for i, s := range upTo {
		if s >= 1 {
			waits[i] = math.Inf(1)
		} else {
			waits[i] = w0 / ((1 - above) * (1 - s))
		}
		above = s
	}
	return waits
}

// PreemptiveSojourns returns the mean sojourn of each class, highest first, at
// a server that breaks off for a higher class and resumes later:
// S1(k)/(1-s(k-1)) + W0(k)/((1-s(k-1))(1-s(k))), W0(k) over the classes down to
// k only. A router that finishes its packets must not show these.
//
// Source: D. Bertsekas, R. Gallager, Data Networks 2e (1992), sec. 3.5.3.
func PreemptiveSojourns(classes []PriorityClass) []float64 {
	sojourns := make([]float64, len(classes))
	above := 0.0
	for i := range classes {
		w0, upTo := residual(classes[:i+1])
		s := upTo[i]
		if s >= 1 {
			sojourns[i] = math.Inf(1)
		} else {
			sojourns[i] = classes[i].S1/(1-above) + w0/((1-above)*(1-s))
		}
		above = s
	}
	return sojourns
}

// ConservedWork returns the sum of load times mean wait over the classes,
// rho W0/(1-rho). It is the same for every order of service that does not
// look at service times, does not break off, and never idles with work
// waiting.
//
// Source: L. Kleinrock, Queueing Systems vol. 2 (1976), sec. 3.4.
func ConservedWork(classes []PriorityClass) float64 {
	w0, upTo := residual(classes)
	if len(classes) == 0 {
		return 0
	}
	rho := upTo[len(upTo)-1]
	if rho >= 1 {
		return math.Inf(1)
	}
	return rho * w0 / (1 - rho)
}
