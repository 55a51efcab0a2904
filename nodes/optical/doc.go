// Package optical is what lies below the routers: the rates that slots,
// containers and channels carry, the grids channels stand on, the cross-connect
// of a site with the slots and channels it hands out per fibre and direction,
// and the stretches of time in which a place of a fibre is dark.
//
// A cross-connect is touched by its own site's events only. Delays are in
// picoseconds (des.Time), rates in bit/s. A cut is one dark stretch at one
// place; who lost what because of it is decided from the instants a packet
// passed there, not by a draw.
package optical
