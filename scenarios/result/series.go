package result

// A Site is a place of the map.
type Site struct {
	Name string   `json:"name"`
	XKm  *float64 `json:"x_km,omitempty"` // east; absent when the scenario gives no position
	YKm  *float64 `json:"y_km,omitempty"` // as the scenario has it
}

// A Turn is a change in the life of a circuit, as its first end saw it.
type Turn struct {
	AtS    float64  `json:"at_s"`
	State  string   `json:"state"`  // "up", "down" or "draining"
	Fibres []string `json:"fibres"` // the way in force, from its first end
}

// A Cut is a place at which a fibre was dark.
type Cut struct {
	Fibre   string   `json:"fibre"`
	WhereKm float64  `json:"where_km"` // from the fibre's first end
	FromS   float64  `json:"from_s"`
	ToS     *float64 `json:"to_s,omitempty"`    // absent when it was dark until the end
	OneWay  string   `json:"one_way,omitempty"` // the site from which nothing passed, when the other way did
}

// A Load is what one direction of a circuit carried in one period.
type Load struct {
	Circuit string      `json:"circuit"`
	From    string      `json:"from"` // the site that sends
	Period  string      `json:"period"`
	Classes []ClassRate `json:"classes"` // those that sent anything, highest first
}

// A ClassRate is a rate of IP bits of one class.
type ClassRate struct {
	Class string  `json:"class"`
	Bps   float64 `json:"bps"`
}

// A Series is what became of the packets of one class by the instant at which
// they were sent, in bins of equal width that follow each other. The columns
// are of equal length; bin i begins at FromS + i times WidthS. Delays of a bin
// in which nothing was delivered are null.
type Series struct {
	Class            string     `json:"class"`
	Close            bool       `json:"close,omitempty"` // a close-up around acts; else the whole run, warm-up included
	FromS            float64    `json:"from_s"`
	WidthS           float64    `json:"width_s"`
	OfferedPackets   []int64    `json:"offered_packets"`
	DeliveredPackets []int64    `json:"delivered_packets"`
	LostPackets      []int64    `json:"lost_packets"` // the others were still inside at the end
	DeliveredBits    []int64    `json:"delivered_bits"`
	MeanDelayS       []*float64 `json:"mean_delay_s"`
	MaxDelayS        []*float64 `json:"max_delay_s"`
}

// A Tail is the distribution of the delay of one class in one period: the
// share AtLeast[i] of the delivered packets took DelayS[i] or longer. The first
// point is the least delay, the last the greatest. Of the points between them
// there are as many as a drawing needs, none with a share below 1e-5.
type Tail struct {
	Class   string    `json:"class"`
	Period  string    `json:"period"`
	DelayS  []float64 `json:"delay_s"`
	AtLeast []float64 `json:"at_least_ratio"`
}
