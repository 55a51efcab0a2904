package result

// A Calibration holds one figure of a check against what was measured in the
// network that the scenario stands for.
type Calibration struct {
	What       string   `json:"what"` // link or delay
	Of         string   `json:"of"`   // a circuit, or a class
	From       string   `json:"from"`
	To         string   `json:"to"`
	Unit       string   `json:"unit"`                 // bit/s of IP bytes, or s
	Measured   float64  `json:"measured"`             // as given
	Model      *float64 `json:"model,omitempty"`      // none: no traffic of the class goes there
	Difference *float64 `json:"difference,omitempty"` // model minus measured
	Share      *float64 `json:"share,omitempty"`      // the difference over what was measured; none if that is 0
}
