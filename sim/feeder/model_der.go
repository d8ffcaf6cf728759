package feeder

import "yearflow/sim/tables"

// InverterFunction is a row of inverter-functions.csv: what an inverter does by IEEE
// Std 1547-2018. NaN stands for a value left blank: the default of the category.
type InverterFunction struct {
	Name        string
	At          tables.Pos
	CategoryA   bool   // else B
	Reactive    string // constant power factor, voltage-reactive power, active power-reactive power, constant reactive power
	PowerFactor float64
	Constant    float64    // constant reactive power, p.u. of rating
	Reference   float64    // reference voltage, p.u.
	V, Q        [4]float64 // p.u.; p.u. of rating, positive delivers
	P           [3]float64 // p.u. of rated active power
	VoltWatt    bool
	VoltWattV   [2]float64 // p.u.
	VoltWattP2  float64    // p.u. of rated active power
	Response    float64    // s, open loop
	WattTime    float64    // s, open loop, of voltage-active power
	Active      bool       // active power has priority
	Limit       float64    // active power limit, p.u. of rated
	AtNight     bool       // reactive power without active power
}

// Solar is what a solar generator is built of where its output comes from weather.
type Solar struct {
	DC          float64 // kW
	Tilt        float64 // deg
	Azimuth     float64 // deg from north
	Losses      float64 // p.u.
	Coefficient float64 // %/°C, negative
	Efficiency  float64 // p.u., of the inverter
}

// Battery is a row of batteries.csv.
type Battery struct {
	Name       string
	At         tables.Pos
	Node       int
	Connection Connection
	Phases     []Phase
	Pairs      []Pair
	EnergyKWh  float64
	KW         float64 // the most either way
	KVA        float64
	RoundTrip  float64 // p.u.
	Reserve    float64 // p.u. of energy
	Initial    float64 // p.u. of energy
	Dispatch   string  // schedule, peak shaving, self-consumption, profile
	Profile    string
	Watched    *Watched
	Target     float64 // kW
	Recharge   float64 // kW
	Windows    []DayWindow
	Weekdays   bool
	Function   int // into Model.Functions; −1: unity power factor
}

// DayWindow is a time of day with a power: positive delivered.
type DayWindow struct {
	From, To float64 // s after local midnight
	KW       float64
}

// Charger is a row of chargers.csv: one charging point and its daily vehicle.
type Charger struct {
	Name            string
	At              tables.Pos
	Node            int
	Connection      Connection
	Phases          []Phase
	Pairs           []Pair
	KW              float64
	PF              float64
	EnergyKWh       float64 // a stay, at the meter
	Arrival, Depart float64 // s after local midnight
	Weekdays        bool
	Delayed         bool
	From, To        float64 // s after local midnight: hours of a delayed charger; NaN: so that it is done by departure
	Group           string  // chargers that share a limit
	GroupLimit      float64 // kW; NaN none
}
