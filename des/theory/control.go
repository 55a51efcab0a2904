package theory

// SetupParallel returns the time from an order to the last node's report if a
// central controller commands all nodes of a circuit at once: compute +
// max(2 oneWay[i] + node[i]). It panics unless there is one delay per node.
//
// Source: computed from the exchange of messages.
func SetupParallel(compute float64, oneWay, node []float64) float64 {
	need(len(oneWay) == len(node), "a set-up needs one delay per node")
	longest := 0.0
	for i, d := range oneWay {
		longest = max(longest, 2*d+node[i])
	}
	return compute + longest
}

// SetupSequential returns the same if each node is commanded after the one
// before has reported: compute + sum(2 oneWay[i] + node[i]). It panics unless
// there is one delay per node.
//
// Source: computed from the exchange of messages.
func SetupSequential(compute float64, oneWay, node []float64) float64 {
	need(len(oneWay) == len(node), "a set-up needs one delay per node")
	sum := compute
	for i, d := range oneWay {
		sum += 2*d + node[i]
	}
	return sum
}

// SetupDistributed returns the time of a set-up signalled along the route and
// back: 2 path + n (2 message + crossConnect), with path the one-way light
// delay, n nodes, message the time a node takes over a message in each
// direction, and crossConnect done before the answer is passed on. It panics if
// n < 0.
//
// Source: the message order of RFC 3209 and RFC 3473.
func SetupDistributed(path float64, n int, message, crossConnect float64) float64 {
	need(n >= 0, "a route needs nodes at or above 0")
	return 2*path + float64(float64(n)*(2*message+crossConnect))
}

// BatchDone returns when the k-th of a batch of circuits is done, counted from
// 1, if they are served one after another from start on: start + k each.
func BatchDone(start, each float64, k int) float64 {
	need(k >= 1, "circuits of a batch are counted from 1")
	return start + float64(float64(k)*each)
}

// BatchMean returns the mean of [BatchDone] over the k circuits of a batch:
// start + each (k+1)/2.
func BatchMean(start, each float64, k int) float64 {
	need(k >= 1, "circuits of a batch are counted from 1")
	return start + float64(each*float64(k+1))/2
}

// CutLoss returns the packets that a constant stream of the given rate loses to
// a cut: rate (2 d + detection + reaction), d the light delay from the sender
// to the break. For what was within d of the break is lost, and the news needs
// d back to the sender.
//
// Source: computed from the propagation of light and of the news.
func CutLoss(rate, toBreak, detection, reaction float64) float64 {
	return rate * (2*toBreak + detection + reaction)
}

// ProtectedGap returns the sending time lost by a 1+1 pair whose receiver
// selects: detection + switching - (spare - working), the last two the delays of
// the ways, wherever the break is. A negative gap is time delivered twice.
//
// Source: computed from the propagation of light.
func ProtectedGap(working, spare, detection, switching float64) float64 {
	return detection + switching - (spare - working)
}

// OutageLoss returns the packets lost in an outage, rate times outage; a
// periodic stream may lose one more or less.
func OutageLoss(rate, outage float64) float64 { return rate * outage }
