// Package transport holds closed-loop transports in the manner of TCP and the
// hosts that use them: clients that ask for transfers, and servers that send
// them under congestion control.
//
// A transfer begins with a handshake of one round trip; then the server sends,
// at first ten segments (RFC 6928), and the receiver acknowledges every second
// full segment or after a delay (RFC 5681). A loss is inferred when three later
// segments are known to have arrived (RFC 6675), or when the retransmission
// timer runs out (RFC 6298). The window follows Reno (RFC 5681) or CUBIC (RFC
// 9438), and answers marks of congestion like losses (RFC 3168).
//
// Where it departs from these: an acknowledgement tells of the segment that
// caused it, not of up to three blocks, so a lost one may cause a segment to be
// sent again in vain; there are no time stamps, and no probe of the tail of a
// transfer; a client asks for one transfer on each connection and no connection
// is closed by packets of its own; a window holds 16,384 segments at most.
//
// All that hosts send they send at once: the access line is not modelled.
package transport
