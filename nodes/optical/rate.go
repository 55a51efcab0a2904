package optical

import (
	"fmt"
	"math/big"
	"math/bits"

	"ferrule/des"
	"ferrule/nodes"
)

// Exact is a bit rate as a fraction of whole bit/s, for the rates of ITU-T
// G.709 are ratios. The zero value is no rate.
type Exact struct{ Num, Den int64 } // bit/s; both positive

// Floor is the rate rounded down to a whole bit/s, so that what is said to fit
// fits. It is less than 1 bit/s low.
func (e Exact) Floor() nodes.Rate { return nodes.Rate(e.Num / e.Den) }

// Nearest is the rate rounded to the nearest bit/s, the precision in which the
// standards print it.
func (e Exact) Nearest() nodes.Rate { return nodes.Rate((e.Num + e.Den/2) / e.Den) }

func (e Exact) rat() *big.Rat { return big.NewRat(e.Num, e.Den) }

// SlotsPerChannel is the number of 1.25 Gb/s tributary slots of an OTU4, a
// lit channel of 100 Gb/s. Source: RFC 7062, section 3.1.2.
const SlotsPerChannel = 80

// A Container is a fixed circuit size of the optical transport network.
type Container struct {
	Name    string
	Slots   int   // 1.25 Gb/s slots it takes of an OTU4
	Rate    Exact // the whole container, ODUk
	Payload Exact // what a client gets of it, OPUk
}

// containers is in ascending order of rate. Rates are ITU-T G.709 tables 7-3
// (OPUk) and 7-4 (ODUk), as ratios of the SDH and Ethernet rates; slots are
// RFC 7062, section 3.1.2.
var containers = [...]Container{
	{"ODU0", 1, Exact{1_244_160_000, 1}, Exact{238 * 1_244_160_000, 239}},
	{"ODU1", 2, Exact{239 * 2_488_320_000, 238}, Exact{2_488_320_000, 1}},
	{"ODU2", 8, Exact{239 * 9_953_280_000, 237}, Exact{238 * 9_953_280_000, 237}},
	{"ODU2e", 8, Exact{239 * 10_312_500_000, 237}, Exact{238 * 10_312_500_000, 237}},
	{"ODU3", 31, Exact{239 * 39_813_120_000, 236}, Exact{238 * 39_813_120_000, 236}},
	{"ODU4", 80, Exact{239 * 99_532_800_000, 227}, Exact{238 * 99_532_800_000, 227}},
}

// ContainerByName returns the container called name, such as "ODU2".
func ContainerByName(name string) (Container, bool) {
	for _, c := range containers {
		if c.Name == name {
			return c, true
		}
	}
	return Container{}, false
}

// ContainerNames lists the names that ContainerByName knows, smallest first.
func ContainerNames() []string {
	names := make([]string, len(containers))
	for i, c := range containers {
		names[i] = c.Name
	}
	return names
}

// A Line is an optical line signal and the slots that it is cut into.
type Line struct {
	Name   string
	Rate   Exact // OTUk, with error correction
	Slots  int   // of 1.25 Gb/s
	Coarse int   // of 2.5 Gb/s; 0 if it has none
	Slot   Exact // nominal rate of one 1.25 Gb/s slot; zero for OTU1, whose slots carry ODU0 only
}

// lines is in ascending order of rate. Line rates are ITU-T G.709 table 7-1,
// slots RFC 7062 section 3.1.2, slot rates ITU-T G.709 table 7-7: 476/3824 of
// an ODU2, 119/3824 of an ODU3, 47.5/3824 of an ODU4.
var lines = [...]Line{
	{"OTU1", Exact{255 * 2_488_320_000, 238}, 2, 1, Exact{}},
	{"OTU2", Exact{255 * 9_953_280_000, 237}, 8, 4, Exact{476 * 239 * 9_953_280_000, 3824 * 237}},
	{"OTU3", Exact{255 * 39_813_120_000, 236}, 32, 16, Exact{119 * 239 * 39_813_120_000, 3824 * 236}},
	{"OTU4", Exact{255 * 99_532_800_000, 227}, 80, 0, Exact{95 * 239 * 99_532_800_000, 2 * 3824 * 227}},
}

// LineByName returns the line signal called name, such as "OTU4".
func LineByName(name string) (Line, bool) {
	for _, l := range lines {
		if l.Name == name {
			return l, true
		}
	}
	return Line{}, false
}

// SlotsOf reports how many 1.25 Gb/s slots of l a fixed container takes; ok is
// false if it does not fit. Three cases depend on the line: an ODU2e takes 9
// slots of an OTU3 and is too fast for an OTU2, and an ODU3 fills an OTU3 (32)
// though it takes 31 slots of an OTU4.
//
// Source: RFC 7062, section 3.1.2.
func (l Line) SlotsOf(c Container) (slots int, ok bool) {
	switch l.Name + " " + c.Name {
	case "OTU2 ODU2e":
		return 0, false
	case "OTU3 ODU2e":
		return 9, true
	case "OTU3 ODU3":
		return 32, true
	}
	if c.Slots > l.Slots {
		return 0, false
	}
	return c.Slots, true
}

// Tolerances of clocks: of a slot, and of a client of constant rate.
const (
	slotPPM   = 20
	clientPPM = 100
	million   = 1_000_000
)

// SlotsForClient reports how many slots of l an ODUflex needs that carries a
// client of constant rate: ceil(r (1 + 100 ppm) / t), r being 239/238 of the
// client's rate and t the slowest slot, 20 ppm below nominal. The number may
// differ from line to line. It is an error if the line has too few slots, has
// none for an ODUflex, or the client's rate is not positive.
//
// Source: RFC 7139, section 5.1; ITU-T G.709 table 7-4 for 239/238.
func (l Line) SlotsForClient(client nodes.Rate) (int, error) {
	if client <= 0 {
		return 0, fmt.Errorf("client rate %d bit/s is not positive", client)
	}
	if l.Slot.Den == 0 {
		return 0, fmt.Errorf("%s carries no ODUflex", l.Name)
	}
	r := new(big.Rat).Mul(big.NewRat(int64(client), 1), big.NewRat(239, 238))
	r.Mul(r, big.NewRat(million+clientPPM, million))
	t := new(big.Rat).Mul(l.Slot.rat(), big.NewRat(million-slotPPM, million))
	r.Quo(r, t)
	n := new(big.Int).Add(r.Num(), r.Denom())
	n.Sub(n, big.NewInt(1)).Quo(n, r.Denom())
	if n.Cmp(big.NewInt(int64(l.Slots))) > 0 {
		return 0, fmt.Errorf("client of %d bit/s needs %s slots, %s has %d", client, n, l.Name, l.Slots)
	}
	return int(n.Int64()), nil
}

// LargestFlex reports the largest ODUflex that fits free slots of l, rounded
// down to a whole bit/s: slots x nominal slot rate x (1 - 20 ppm). It is 0
// where l carries no ODUflex. It panics if free is negative or more than l has.
//
// Source: RFC 7138, section 4.1.3.
func (l Line) LargestFlex(free int) nodes.Rate {
	if free < 0 || free > l.Slots {
		panic(fmt.Sprintf("optical: %d free slots of %s", free, l.Name))
	}
	if l.Slot.Den == 0 {
		return 0
	}
	r := new(big.Rat).Mul(l.Slot.rat(), big.NewRat(int64(free)*(million-slotPPM), million))
	return nodes.Rate(new(big.Int).Quo(r.Num(), r.Denom()).Int64())
}

// FlexRate returns the rate of an ODUflex for packets, ODUflex(GFP), of n
// slots, a whole number of bit/s. The rate of a slot rises at 9 and at 33
// slots, where smaller lines can no longer carry it. It is an error if n is
// outside 1..80.
//
// Source: ITU-T G.709 table 7-8.
func FlexRate(n int) (nodes.Rate, error) {
	switch {
	case n < 1 || n > SlotsPerChannel:
		return 0, fmt.Errorf("%d slots: a circuit takes 1 to %d", n, SlotsPerChannel)
	case n <= 8:
		return nodes.Rate(n) * 1_249_177_230, nil
	case n <= 32:
		return nodes.Rate(n) * 1_254_470_354, nil
	default:
		return nodes.Rate(n) * 1_301_467_133, nil
	}
}

// ExactPayloadOfSlots returns what a client gets of n slots: 238/239 of
// FlexRate. It is an error if n is outside 1..80.
//
// Source: ITU-T G.709 table 7-4 gives the ODUflex as 239/238 of its payload.
func ExactPayloadOfSlots(n int) (Exact, error) {
	r, err := FlexRate(n)
	return Exact{238 * int64(r), 239}, err
}

// PayloadOfSlots is ExactPayloadOfSlots rounded down to a whole bit/s: 2 slots
// carry 2 487 901 094 bit/s.
func PayloadOfSlots(n int) (nodes.Rate, error) {
	e, err := ExactPayloadOfSlots(n)
	if err != nil {
		return 0, err
	}
	return e.Floor(), nil
}

// A Channel is a whole wavelength of a rate class.
type Channel struct {
	Class   nodes.Rate // its name as a rate: 10, 40, or a multiple of 100 Gb/s
	Payload Exact      // what a client gets: OPU2, OPU3, OPU4 or OPUCn
	Slots   int        // 1.25 Gb/s slots it is cut into when lit for circuits
}

// maxMultiple bounds n of OTUCn: 64 x 100 Gb/s is beyond any wavelength.
const maxMultiple = 64

// ChannelOfClass returns the channel of a rate class: 10 Gb/s (OTU2), 40 Gb/s
// (OTU3), 100 Gb/s (OTU4) or n x 100 Gb/s with n from 2 to 64 (OTUCn, whose
// payload is n x 238/226 x 99 532 800 kbit/s). It is an error for any other.
// The standard cuts an OTUCn into 20 n slots of 5 Gb/s; here each counts as
// four of 1.25 Gb/s, a simplification.
//
// Source: ITU-T G.709 table 7-3 and, for OTUCn, G.709 (2016 on).
func ChannelOfClass(class nodes.Rate) (Channel, error) {
	switch n := int64(class / (100 * nodes.Gbps)); {
	case class == 10*nodes.Gbps:
		return Channel{class, containers[2].Payload, 8}, nil
	case class == 40*nodes.Gbps:
		return Channel{class, containers[4].Payload, 32}, nil
	case class == 100*nodes.Gbps:
		return Channel{class, containers[5].Payload, SlotsPerChannel}, nil
	case n >= 2 && n <= maxMultiple && class%(100*nodes.Gbps) == 0:
		return Channel{class, Exact{n * 238 * 99_532_800_000, 226}, int(n) * SlotsPerChannel}, nil
	default:
		return Channel{}, fmt.Errorf("no channel of %d bit/s: a channel is 10 Gb/s, 40 Gb/s, 100 Gb/s or a multiple of 100 Gb/s up to %d", class, maxMultiple*100)
	}
}

// RampSlope is how fast an ODUflex for packets grows or shrinks, in bit/s per
// second: 512 Mb/s each second, in each direction.
//
// Source: the hitless adjustment of ITU-T G.7044, as summarised by the OIF
// agreement on OTN over packet fabrics; the clause itself was not read.
const RampSlope nodes.Rate = 512 * nodes.Mbps

// RampTime reports how long the rate of an ODUflex takes from one number of
// slots to another, up or down, rounded up to a picosecond: the difference of
// FlexRate over RampSlope. It is an error if a number is outside 1..80.
func RampTime(from, to int) (des.Time, error) {
	a, errA := FlexRate(from)
	b, errB := FlexRate(to)
	switch {
	case errA != nil:
		return 0, errA
	case errB != nil:
		return 0, errB
	}
	hi, lo := bits.Mul64(uint64(max(a, b)-min(a, b)), uint64(des.Second))
	q, rem := bits.Div64(hi, lo, uint64(RampSlope))
	if rem > 0 {
		q++
	}
	return des.Time(q), nil
}

// RampPayload reports the payload rate that an ODUflex offers t after its ramp
// began, rounded down to a whole bit/s. Before the ramp it is that of from
// slots, after it that of to slots, and between it moves by 238/239 of
// RampSlope. It is an error if a number is outside 1..80.
func RampPayload(from, to int, t des.Time) (nodes.Rate, error) {
	length, err := RampTime(from, to)
	if err != nil {
		return 0, err
	}
	if t >= length {
		return PayloadOfSlots(to)
	}
	r, err := FlexRate(from)
	if err != nil {
		return 0, err
	}
	moved := new(big.Rat).Mul(big.NewRat(int64(max(t, 0)), int64(des.Second)), big.NewRat(int64(RampSlope), 1))
	if to < from {
		moved.Neg(moved)
	}
	moved.Add(moved, big.NewRat(int64(r), 1))
	moved.Mul(moved, big.NewRat(238, 239))
	return nodes.Rate(new(big.Int).Quo(moved.Num(), moved.Denom()).Int64()), nil
}
