package central

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
)

// people words a duration for people: three significant digits.
func people(d des.Time) string {
	switch d {
	case 0:
		return "0 s"
	case des.Never:
		return "never"
	}
	unit, name := des.Picosecond, "ps"
	for _, u := range [...]struct {
		size des.Time
		name string
	}{{des.Second, "s"}, {des.Millisecond, "ms"}, {des.Microsecond, "us"}, {des.Nanosecond, "ns"}} {
		if max(d, -d) >= u.size {
			unit, name = u.size, u.name
			break
		}
	}
	return three(float64(d)/float64(unit)) + " " + name
}

// three writes a number below 1000 with three significant digits.
func three(v float64) string {
	digits := 2
	switch size := math.Abs(v); {
	case size >= 99.95:
		digits = 0
	case size >= 9.995:
		digits = 1
	}
	return strconv.FormatFloat(v, 'f', digits, 64)
}

// rateWords words a rate for people: three significant digits.
func rateWords(r nodes.Rate) string {
	switch {
	case r >= nodes.Gbps:
		return three(float64(r)/float64(nodes.Gbps)) + " Gbit/s"
	case r >= nodes.Mbps:
		return three(float64(r)/float64(nodes.Mbps)) + " Mbit/s"
	default:
		return strconv.FormatInt(int64(r), 10) + " bit/s"
	}
}

// counted words a number of circuits and names them.
func (c *Controller) counted(list []nodes.CircuitID) string {
	if len(list) == 0 {
		return "no circuit over it"
	}
	var names []string
	for _, id := range list {
		names = append(names, c.k.circuitName(id))
	}
	if len(list) == 1 {
		return "1 circuit: " + names[0]
	}
	return fmt.Sprintf("%d circuits: %s", len(list), strings.Join(names, ", "))
}

// attempts words a number of attempts.
func attempts(n int) string {
	if n == 1 {
		return "1 attempt"
	}
	return fmt.Sprintf("%d attempts", n)
}
