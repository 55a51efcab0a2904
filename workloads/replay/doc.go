// Package replay sends traffic as it was measured: packets of a capture file,
// packets of a table, or flows of a table.
//
// [Open] reads a file once from end to end, says what is wrong with it at the
// place where it is wrong, counts what is in it and returns a [Trace]. A
// [Source] made from a trace reads the file again as it sends; it keeps one
// window onto the file, however large that is, and allocates nothing for a
// packet. Only tables of flows are held in memory, and are therefore short.
//
// Packets are given to classes of service by rules, see [Rule]. Those of a
// capture that are not IP, or of no class, are counted and left out. Sizes are
// those of the IP packet as it was on the line, even where the capture holds
// only the beginning of it. Times are exact to the picosecond and count from
// the earliest packet of the file.
package replay
