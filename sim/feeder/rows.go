package feeder

import "yearflow/sim/tables"

// The rows of the tables of a feeder. The tags are the columns: see package tables.

type sourceRow struct {
	Row     tables.Row    `csv:"@"`
	Node    tables.Text   `csv:"node" is:"key"`
	Nominal tables.Number `csv:"nominal" unit:"kV" is:"required,>0"`
	Voltage tables.Number `csv:"voltage" unit:"pu" is:">0" default:"1"`
	Angle   tables.Number `csv:"angle" unit:"deg" default:"0"`
	Profile tables.Text   `csv:"voltage profile"`
	At      tables.Text   `csv:"voltage at" words:"behind|bus" default:"behind"`
	MVA3    tables.Number `csv:"short circuit 3ph" unit:"MVA" is:">0"`
	XR3     tables.Number `csv:"x/r 3ph" is:">=0"`
	MVA1    tables.Number `csv:"short circuit 1ph" unit:"MVA" is:">0"`
	XR1     tables.Number `csv:"x/r 1ph" is:">=0"`
}

type nodeRow struct {
	Row       tables.Row    `csv:"@"`
	Node      tables.Text   `csv:"node" is:"key"`
	Nominal   tables.Number `csv:"nominal" unit:"kV" is:">0"`
	X         tables.Number `csv:"x" unit:"m"`
	Y         tables.Number `csv:"y" unit:"m"`
	Longitude tables.Number `csv:"longitude" unit:"deg"`
	Latitude  tables.Number `csv:"latitude" unit:"deg"`
	Area      tables.Text   `csv:"area"`
}

type sectionRow struct {
	Row          tables.Row    `csv:"@"`
	Name         tables.Text   `csv:"section" is:"key"`
	From         tables.Text   `csv:"from" is:"required"`
	To           tables.Text   `csv:"to" is:"required"`
	Phases       tables.Text   `csv:"phases" is:"required" upper:"yes"`
	Length       tables.Number `csv:"length" unit:"km" is:"required,>0"`
	Construction tables.Text   `csv:"construction" is:"required"`
	Rating       tables.Number `csv:"rating" unit:"A" is:">0"`
	Emergency    tables.Number `csv:"emergency rating" unit:"A" is:">0"`
	Winter       tables.Number `csv:"winter rating" unit:"A" is:">0"`
}

type switchRow struct {
	Row    tables.Row    `csv:"@"`
	Name   tables.Text   `csv:"switch" is:"key"`
	From   tables.Text   `csv:"from" is:"required"`
	To     tables.Text   `csv:"to" is:"required"`
	Phases tables.Text   `csv:"phases" is:"required" upper:"yes"`
	State  tables.Text   `csv:"state" is:"required" words:"closed|open"`
	Rating tables.Number `csv:"rating" unit:"A" is:">0"`
}

type constructionRow struct {
	Row        tables.Row    `csv:"@"`
	Name       tables.Text   `csv:"construction" is:"key"`
	Kind       tables.Text   `csv:"kind" is:"required" words:"overhead|concentric neutral|tape shield|triplex|matrix|sequence"`
	Spacing    tables.Text   `csv:"spacing"`
	Phase      tables.Text   `csv:"phase conductor"`
	Neutral    tables.Text   `csv:"neutral conductor"`
	Earth      tables.Number `csv:"earth resistivity" unit:"ohm m" is:">0"`
	Rating     tables.Number `csv:"rating" unit:"A" is:">0"`
	R1         tables.Number `csv:"r1" unit:"ohm/km" is:">=0"`
	X1         tables.Number `csv:"x1" unit:"ohm/km"`
	R0         tables.Number `csv:"r0" unit:"ohm/km" is:">=0"`
	X0         tables.Number `csv:"x0" unit:"ohm/km"`
	B1         tables.Number `csv:"b1" unit:"uS/km" is:">=0"`
	B0         tables.Number `csv:"b0" unit:"uS/km" is:">=0"`
	Insulation tables.Number `csv:"insulation" unit:"in" is:">0"`
}

type impedanceRow struct {
	Row          tables.Row     `csv:"@"`
	Construction tables.Text    `csv:"construction" is:"key"`
	I            tables.Integer `csv:"row" is:"key,>0"`
	J            tables.Integer `csv:"column" is:"key,>0"`
	R            tables.Number  `csv:"r" unit:"ohm/km" is:"required"`
	X            tables.Number  `csv:"x" unit:"ohm/km" is:"required"`
	B            tables.Number  `csv:"b" unit:"uS/km" default:"0"`
}

type spacingRow struct {
	Row      tables.Row    `csv:"@"`
	Spacing  tables.Text   `csv:"spacing" is:"key"`
	Position tables.Text   `csv:"position" is:"key" words:"1|2|3|N"`
	X        tables.Number `csv:"x" unit:"m" is:"required"`
	Y        tables.Number `csv:"y" unit:"m" is:"required"`
}

type conductorRow struct {
	Row        tables.Row    `csv:"@"`
	Name       tables.Text   `csv:"conductor" is:"key"`
	Resistance tables.Number `csv:"resistance" unit:"ohm/km" is:"required,>0"`
	GMR        tables.Number `csv:"gmr" unit:"m" is:"required,>0"`
	Diameter   tables.Number `csv:"diameter" unit:"m" is:"required,>0"`
	Rating     tables.Number `csv:"rating" unit:"A" is:">0"`
}

type cableRow struct {
	Row          tables.Row     `csv:"@"`
	Name         tables.Text    `csv:"cable" is:"key"`
	Conductor    tables.Text    `csv:"conductor" is:"required"`
	Outside      tables.Number  `csv:"outside diameter" unit:"m" is:">0"`
	Strands      tables.Integer `csv:"strands" is:">0"`
	Strand       tables.Text    `csv:"strand conductor"`
	Shield       tables.Number  `csv:"shield diameter" unit:"m" is:">0"`
	Thickness    tables.Number  `csv:"shield thickness" unit:"m" is:">0"`
	Resistivity  tables.Number  `csv:"shield resistivity" unit:"ohm m" is:">0"`
	Permittivity tables.Number  `csv:"permittivity" is:">0" default:"2.3"`
	Rating       tables.Number  `csv:"rating" unit:"A" is:">0"`
}

type transformerRow struct {
	Row        tables.Row    `csv:"@"`
	Name       tables.Text   `csv:"transformer" is:"key"`
	From       tables.Text   `csv:"from" is:"required"`
	To         tables.Text   `csv:"to" is:"required"`
	Phases     tables.Text   `csv:"phases" is:"required" upper:"yes"`
	Rating     tables.Number `csv:"rating" unit:"kVA" is:"required,>0"`
	High       tables.Number `csv:"high" unit:"kV" is:"required,>0"`
	Low        tables.Number `csv:"low" unit:"kV" is:"required,>0"`
	Connection tables.Text   `csv:"connection" is:"required"`
	Impedance  tables.Number `csv:"impedance" unit:"pu" is:">0"`
	XR         tables.Number `csv:"x/r" is:">0"`
	LoadLoss   tables.Number `csv:"load loss" unit:"W" is:">0"`
	Resistance tables.Number `csv:"resistance" unit:"pu" is:">=0"`
	Reactance  tables.Number `csv:"reactance" unit:"pu" is:">=0"`
	NoLoad     tables.Number `csv:"no-load loss" unit:"W" is:">=0" default:"0"`
	Exciting   tables.Number `csv:"exciting current" unit:"pu" is:">=0"`
	Tap        tables.Number `csv:"tap" unit:"kV" is:">0"`
	MidTap     tables.Flag   `csv:"mid-tap grounded"`
	HighEnds   tables.Text   `csv:"high terminals" upper:"yes"`
	LowEnds    tables.Text   `csv:"low terminals"`
}

type regulatorRow struct {
	Row        tables.Row     `csv:"@"`
	Name       tables.Text    `csv:"regulator" is:"key"`
	From       tables.Text    `csv:"from" is:"required"`
	To         tables.Text    `csv:"to" is:"required"`
	Phases     tables.Text    `csv:"phases" is:"required" upper:"yes"`
	Connection tables.Text    `csv:"connection" words:"wye|open-delta AB-CB|open-delta BC-AC|open-delta CA-BA|closed-delta" default:"wye"`
	Ganged     tables.Flag    `csv:"ganged" default:"no"`
	PT         tables.Number  `csv:"pt ratio" is:"required,>0"`
	CT         tables.Number  `csv:"ct primary" unit:"A" is:"required,>0"`
	Range      tables.Number  `csv:"range" unit:"pu" is:">0" default:"0.1"`
	Steps      tables.Integer `csv:"steps each way" is:">0" default:"16"`
	Rating     tables.Number  `csv:"rating" unit:"A" is:">0"`
	Type       tables.Text    `csv:"type" words:"A|B" default:"A"`
	NoLoad     tables.Number  `csv:"no-load loss" unit:"W" is:">=0" default:"0"`
	LoadLoss   tables.Number  `csv:"load loss" unit:"W" is:">=0" default:"0"`
	Impedance  tables.Number  `csv:"impedance" unit:"pu" is:">=0" default:"0"`
}

type regulatorSettingsRow struct {
	Row              tables.Row     `csv:"@"`
	Regulator        tables.Text    `csv:"regulator" is:"key"`
	Phase            tables.Text    `csv:"phase" is:"key" upper:"yes"`
	Set              tables.Number  `csv:"set" unit:"V" is:"required,>0"`
	Bandwidth        tables.Number  `csv:"bandwidth" unit:"V" is:"required,>0"`
	Delay            tables.Number  `csv:"delay" unit:"s" is:"required,>0"`
	TapTime          tables.Number  `csv:"tap time" unit:"s" is:">0" default:"5"`
	Timer            tables.Text    `csv:"timer" words:"restart|integrate" default:"restart"`
	R                tables.Number  `csv:"ldc r" unit:"V" default:"0"`
	X                tables.Number  `csv:"ldc x" unit:"V" default:"0"`
	Rotation         tables.Number  `csv:"ldc rotation" unit:"deg"`
	High             tables.Number  `csv:"limit high" unit:"V" is:">0"`
	Low              tables.Number  `csv:"limit low" unit:"V" is:">0"`
	Margin           tables.Number  `csv:"limit margin" unit:"V" is:">=0" default:"1"`
	Control          tables.Text    `csv:"control" words:"automatic|held" default:"automatic"`
	Tap              tables.Integer `csv:"tap" default:"0"`
	Highest          tables.Integer `csv:"highest tap"`
	Lowest           tables.Integer `csv:"lowest tap"`
	Reverse          tables.Text    `csv:"reverse" words:"none|forward only|reverse only|idle|follow|neutral|stay" default:"none"`
	Threshold        tables.Number  `csv:"reverse threshold" unit:"pu" is:">=0"`
	ReverseSet       tables.Number  `csv:"reverse set" unit:"V" is:">0"`
	ReverseBandwidth tables.Number  `csv:"reverse bandwidth" unit:"V" is:">0"`
	ReverseDelay     tables.Number  `csv:"reverse delay" unit:"s" is:">0"`
	ReverseR         tables.Number  `csv:"reverse ldc r" unit:"V"`
	ReverseX         tables.Number  `csv:"reverse ldc x" unit:"V"`
}

type capacitorRow struct {
	Row        tables.Row    `csv:"@"`
	Name       tables.Text   `csv:"capacitor" is:"key"`
	Node       tables.Text   `csv:"node" is:"required"`
	Phases     tables.Text   `csv:"phases" is:"required" upper:"yes"`
	Size       tables.Number `csv:"size" unit:"kvar" is:"required,>0"`
	Nominal    tables.Number `csv:"nominal" unit:"kV" is:">0"`
	Connection tables.Text   `csv:"connection" words:"wye|delta" default:"wye"`
	State      tables.Text   `csv:"state" words:"closed|open" default:"closed"`
}

type capacitorSettingsRow struct {
	Row            tables.Row     `csv:"@"`
	Capacitor      tables.Text    `csv:"capacitor" is:"key"`
	Control        tables.Text    `csv:"control" is:"required" words:"held|voltage|kvar|current|power factor|temperature|time"`
	Phase          tables.Text    `csv:"phase" upper:"yes"`
	Watched        tables.Text    `csv:"watched section"`
	Profile        tables.Text    `csv:"profile"`
	VoltageOn      tables.Number  `csv:"voltage on" unit:"V" is:">0"`
	VoltageOff     tables.Number  `csv:"voltage off" unit:"V" is:">0"`
	KvarOn         tables.Number  `csv:"kvar on" unit:"kvar"`
	KvarOff        tables.Number  `csv:"kvar off" unit:"kvar"`
	CurrentOn      tables.Number  `csv:"current on" unit:"A" is:">=0"`
	CurrentOff     tables.Number  `csv:"current off" unit:"A" is:">=0"`
	FactorOn       tables.Number  `csv:"power factor on"`
	FactorOff      tables.Number  `csv:"power factor off"`
	TemperatureOn  tables.Number  `csv:"temperature on" unit:"degC"`
	TemperatureOff tables.Number  `csv:"temperature off" unit:"degC"`
	TimeOn         tables.Text    `csv:"time on"`
	TimeOff        tables.Text    `csv:"time off"`
	Days           tables.Text    `csv:"days" words:"all|weekdays" default:"all"`
	Delay          tables.Number  `csv:"delay" unit:"s" is:">0" default:"60"`
	Lockout        tables.Number  `csv:"lockout" unit:"s" is:">=0" default:"300"`
	Limit          tables.Integer `csv:"daily limit" is:">0"`
	Deadband       tables.Number  `csv:"override deadband" unit:"V" is:">=0" default:"2"`
}

type loadRow struct {
	Row        tables.Row    `csv:"@"`
	Name       tables.Text   `csv:"load" is:"key"`
	Node       tables.Text   `csv:"node" is:"required"`
	Phases     tables.Text   `csv:"phases" is:"required" upper:"yes"`
	Connection tables.Text   `csv:"connection" words:"wye|delta" default:"wye"`
	Real       tables.Number `csv:"real" unit:"kW" is:">=0"`
	Connected  tables.Number `csv:"connected" unit:"kVA" is:">=0"`
	Energy     tables.Number `csv:"energy" unit:"kWh" is:">=0"`
	Reactive   tables.Number `csv:"reactive" unit:"kvar"`
	Factor     tables.Number `csv:"power factor"`
	ZIP        tables.Text   `csv:"zip" default:"power"`
	Profile    tables.Text   `csv:"profile"`
	Customers  tables.Number `csv:"customers" is:">=0" default:"1"`
}

type energyRow struct {
	Row    tables.Row    `csv:"@"`
	Load   tables.Text   `csv:"load" is:"key"`
	Month  tables.Text   `csv:"month" is:"key"`
	Energy tables.Number `csv:"energy" unit:"kWh" is:"required,>=0"`
}

type zipRow struct {
	Row tables.Row    `csv:"@"`
	ZIP tables.Text   `csv:"zip" is:"key"`
	PZ  tables.Number `csv:"pz" is:"required"`
	PI  tables.Number `csv:"pi" is:"required"`
	PP  tables.Number `csv:"pp" is:"required"`
	QZ  tables.Number `csv:"qz" is:"required"`
	QI  tables.Number `csv:"qi" is:"required"`
	QP  tables.Number `csv:"qp" is:"required"`
}

type generatorRow struct {
	Row         tables.Row    `csv:"@"`
	Name        tables.Text   `csv:"generator" is:"key"`
	Node        tables.Text   `csv:"node" is:"required"`
	Phases      tables.Text   `csv:"phases" is:"required" upper:"yes"`
	Connection  tables.Text   `csv:"connection" words:"wye|delta" default:"wye"`
	Kind        tables.Text   `csv:"kind" is:"required" words:"solar|wind|hydro|engine|other"`
	Rating      tables.Number `csv:"rating" unit:"kVA" is:"required,>0"`
	Real        tables.Number `csv:"real" unit:"kW" is:">=0"`
	Factor      tables.Number `csv:"power factor" default:"1"`
	Profile     tables.Text   `csv:"profile"`
	Function    tables.Text   `csv:"function"`
	DC          tables.Number `csv:"dc" unit:"kW"`
	Tilt        tables.Number `csv:"tilt" unit:"deg"`
	Azimuth     tables.Number `csv:"azimuth" unit:"deg"`
	Losses      tables.Number `csv:"losses" unit:"pu"`
	Coefficient tables.Number `csv:"temperature coefficient" unit:"%/degC"`
	Efficiency  tables.Number `csv:"inverter efficiency" unit:"pu"`
}
