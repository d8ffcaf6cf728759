package feeder

import "yearflow/sim/tables"

type functionRow struct {
	Row         tables.Row    `csv:"@"`
	Name        tables.Text   `csv:"function" is:"key"`
	Category    tables.Text   `csv:"category" words:"A|B" default:"B"`
	Reactive    tables.Text   `csv:"reactive" words:"constant power factor|voltage-reactive power|active power-reactive power|constant reactive power" default:"constant power factor"`
	PowerFactor tables.Number `csv:"power factor"`
	Constant    tables.Number `csv:"reactive power" unit:"pu"`
	Reference   tables.Number `csv:"reference voltage" unit:"pu" is:">0"`
	V1          tables.Number `csv:"v1" unit:"pu" is:">0"`
	V2          tables.Number `csv:"v2" unit:"pu" is:">0"`
	V3          tables.Number `csv:"v3" unit:"pu" is:">0"`
	V4          tables.Number `csv:"v4" unit:"pu" is:">0"`
	Q1          tables.Number `csv:"q1" unit:"pu"`
	Q2          tables.Number `csv:"q2" unit:"pu"`
	Q3          tables.Number `csv:"q3" unit:"pu"`
	Q4          tables.Number `csv:"q4" unit:"pu"`
	P1          tables.Number `csv:"p1" unit:"pu" is:">=0"`
	P2          tables.Number `csv:"p2" unit:"pu" is:">=0"`
	P3          tables.Number `csv:"p3" unit:"pu" is:">=0"`
	VoltWatt    tables.Flag   `csv:"voltage-active power"`
	WattV1      tables.Number `csv:"active v1" unit:"pu" is:">0"`
	WattV2      tables.Number `csv:"active v2" unit:"pu" is:">0"`
	WattP2      tables.Number `csv:"active p2" unit:"pu" is:">=0"`
	WattTime    tables.Number `csv:"active response time" unit:"s" is:">0"`
	Response    tables.Number `csv:"open loop response time" unit:"s" is:">0"`
	Priority    tables.Text   `csv:"priority" words:"active|reactive" default:"reactive"`
	Limit       tables.Number `csv:"active power limit" unit:"pu" is:">0"`
	AtNight     tables.Flag   `csv:"at night"`
}

type batteryRow struct {
	Row           tables.Row    `csv:"@"`
	Name          tables.Text   `csv:"battery" is:"key"`
	Node          tables.Text   `csv:"node" is:"required"`
	Phases        tables.Text   `csv:"phases" is:"required" upper:"yes"`
	Connection    tables.Text   `csv:"connection" words:"wye|delta" default:"wye"`
	Energy        tables.Number `csv:"energy" unit:"kWh" is:"required,>0"`
	Power         tables.Number `csv:"power" unit:"kW" is:"required,>0"`
	Rating        tables.Number `csv:"rating" unit:"kVA" is:">0"`
	RoundTrip     tables.Number `csv:"round-trip efficiency" unit:"pu" is:">0" default:"0.85"`
	Reserve       tables.Number `csv:"reserve" unit:"pu" is:">=0" default:"0"`
	Initial       tables.Number `csv:"initial" unit:"pu" is:">=0" default:"0.5"`
	Dispatch      tables.Text   `csv:"dispatch" is:"required" words:"schedule|peak shaving|self-consumption|profile"`
	Profile       tables.Text   `csv:"profile"`
	Watched       tables.Text   `csv:"watched section"`
	Target        tables.Number `csv:"target" unit:"kW"`
	Recharge      tables.Number `csv:"recharge" unit:"kW"`
	ChargeFrom    tables.Text   `csv:"charge from"`
	ChargeTo      tables.Text   `csv:"charge to"`
	DischargeFrom tables.Text   `csv:"discharge from"`
	DischargeTo   tables.Text   `csv:"discharge to"`
	Days          tables.Text   `csv:"days" words:"all|weekdays" default:"all"`
	Function      tables.Text   `csv:"function"`
}

type chargerRow struct {
	Row        tables.Row    `csv:"@"`
	Name       tables.Text   `csv:"charger" is:"key"`
	Node       tables.Text   `csv:"node" is:"required"`
	Phases     tables.Text   `csv:"phases" is:"required" upper:"yes"`
	Connection tables.Text   `csv:"connection" words:"wye|delta" default:"wye"`
	Power      tables.Number `csv:"power" unit:"kW" is:"required,>0"`
	Factor     tables.Number `csv:"power factor" default:"1"`
	Arrival    tables.Text   `csv:"arrival" is:"required"`
	Departure  tables.Text   `csv:"departure" is:"required"`
	Energy     tables.Number `csv:"energy" unit:"kWh" is:"required,>0"`
	Days       tables.Text   `csv:"days" words:"all|weekdays" default:"all"`
	Charging   tables.Text   `csv:"charging" words:"unmanaged|delayed" default:"unmanaged"`
	From       tables.Text   `csv:"from"`
	To         tables.Text   `csv:"to"`
	Group      tables.Text   `csv:"group"`
	GroupLimit tables.Number `csv:"group limit" unit:"kW" is:">0"`
}
