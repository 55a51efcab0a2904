package quality

import "fmt"

// Codec is a coder of speech with what is published of its impairment.
type Codec uint8

// The codecs. Those up to CodecGSMEFR have a published robustness against loss.
const (
	CodecG711          Codec = iota // 64 kbit/s, losses left silent, 10 ms packets
	CodecG711Concealed              // with the loss concealment of G.711 Appendix I
	CodecG729AVAD                   // 8 kbit/s with voice activity detection, 20 ms packets
	CodecG7231VAD                   // 6.3 kbit/s with voice activity detection, 30 ms packets
	CodecGSMEFR                     // 12.2 kbit/s, 20 ms packets
	CodecG729A                      // 8 kbit/s
	CodecG726at40                   // 40 kbit/s
	CodecG726at32                   // 32 kbit/s
	CodecG726at24                   // 24 kbit/s
	CodecG726at16                   // 16 kbit/s
	CodecG728at16                   // 16 kbit/s
	CodecG728at12k8                 // 12.8 kbit/s
	CodecG7231at6k3                 // 6.3 kbit/s
	CodecG7231at5k3                 // 5.3 kbit/s
	codecs
)

// codecTable holds names, Ie and Bpl; a Bpl of 0 is not published.
var codecTable = [codecs]struct {
	name    string
	ie, bpl float64
}{
	CodecG711:          {"G.711", 0, 4.3},
	CodecG711Concealed: {"G.711 with concealment", 0, 25.1},
	CodecG729AVAD:      {"G.729A with VAD", 11, 19},
	CodecG7231VAD:      {"G.723.1 at 6.3 kbit/s with VAD", 15, 16.1},
	CodecGSMEFR:        {"GSM EFR", 5, 10},
	CodecG729A:         {"G.729A", 10, 0},
	CodecG726at40:      {"G.726 at 40 kbit/s", 2, 0},
	CodecG726at32:      {"G.726 at 32 kbit/s", 7, 0},
	CodecG726at24:      {"G.726 at 24 kbit/s", 25, 0},
	CodecG726at16:      {"G.726 at 16 kbit/s", 50, 0},
	CodecG728at16:      {"G.728 at 16 kbit/s", 7, 0},
	CodecG728at12k8:    {"G.728 at 12.8 kbit/s", 20, 0},
	CodecG7231at6k3:    {"G.723.1 at 6.3 kbit/s", 15, 0},
	CodecG7231at5k3:    {"G.723.1 at 5.3 kbit/s", 19, 0},
}

// String returns the name of the codec.
func (c Codec) String() string {
	if c >= codecs {
		panic(fmt.Sprintf("quality: codec %d", uint8(c)))
	}
	return codecTable[c].name
}

// Impairment returns the equipment impairment factor without loss, Ie, and the
// packet-loss robustness factor, Bpl. robust is false if no Bpl is published:
// then the codec can be rated without loss only.
//
// Source: ITU-T G.113 Appendix I, Tables I.1 (without loss) and I.4, as quoted
// in lectures.
func (c Codec) Impairment() (ie, bpl float64, robust bool) {
	if c >= codecs {
		panic(fmt.Sprintf("quality: codec %d", uint8(c)))
	}
	x := codecTable[c]
	return x.ie, x.bpl, x.bpl > 0
}
