// Package quality judges what arrives as its users would: voice by the E-model
// of ITU-T G.107 behind a de-jitter buffer, streamed media by the media delivery
// index of RFC 4445 and by the stalls of a player, a network by the classes of
// ITU-T Y.1541 and the availability of ITU-T Y.1563.
//
// Every judge is fed what happened in the order in which it happened, with the
// instants handed in: none holds a clock, starts an event or draws a number.
// Judges of streams (Dejitter, MediaIndex, Playout, Availability) are values
// without pointers that allocate nothing.
//
// Delays are one way, from mouth to ear where speech is meant. Loss is a
// fraction, not a percentage, and counts packets that come too late to be
// played.
package quality
