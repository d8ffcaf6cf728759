package feeder

// Description is what a feeder is, in counts and sums.
type Description struct {
	Nodes, NodePhases int
	Parts             int // galvanic parts
	Sources           int
	Sections          int
	LengthKM          float64
	ByConstruction    []ConstructionLength // in the order of the table; only those that sections use
	Switches          int
	SwitchesOpen      int
	Transformers      int
	TransformerKVA    float64
	Regulators        int
	RegulatorUnits    int
	Capacitors        int
	CapacitorKVAR     float64
	Controlled        int // capacitors with a control other than held
	Loads             int
	LoadKW, LoadKVAR  float64 // of loads with an amount in kW, at profile 1
	LoadsByEnergy     int     // given in kWh
	LoadsByProfile    int     // given by a profile in kW
	Customers         float64
	Generators        int
	GeneratorKVA      float64
}

// ConstructionLength is how much of the feeder is built of one construction.
type ConstructionLength struct {
	Name, Kind string
	Sections   int
	LengthKM   float64
}

// Describe returns what the feeder is.
func (s *Study) Describe() Description { return s.Model.Describe() }

// Describe returns what the feeder is.
func (m *Model) Describe() Description {
	d := Description{Nodes: len(m.Nodes), Sources: len(m.Sources), Sections: len(m.Sections), Switches: len(m.Switches), Transformers: len(m.Transformers),
		Regulators: len(m.Regulators), Capacitors: len(m.Capacitors), Loads: len(m.Loads), Generators: len(m.Generators)}
	for i := range m.Nodes {
		d.NodePhases += len(m.Nodes[i].Phases)
		d.Parts = max(d.Parts, m.Nodes[i].Part+1)
	}
	lengths := make([]ConstructionLength, len(m.Constructions))
	for i := range m.Sections {
		s := &m.Sections[i]
		d.LengthKM += s.LengthKM
		lengths[s.Construction].Sections++
		lengths[s.Construction].LengthKM += s.LengthKM
	}
	for i, l := range lengths {
		if l.Sections > 0 {
			l.Name, l.Kind = m.Constructions[i].Name, m.Constructions[i].Kind
			d.ByConstruction = append(d.ByConstruction, l)
		}
	}
	for i := range m.Switches {
		if !m.Switches[i].Closed {
			d.SwitchesOpen++
		}
	}
	for i := range m.Transformers {
		d.TransformerKVA += m.Transformers[i].KVA
	}
	for i := range m.Regulators {
		d.RegulatorUnits += len(m.Regulators[i].Units)
	}
	for i := range m.Capacitors {
		c := &m.Capacitors[i]
		d.CapacitorKVAR += c.KVAR
		if c.Control != nil && c.Control.Control != CapacitorHeld {
			d.Controlled++
		}
	}
	for i := range m.Loads {
		l := &m.Loads[i]
		d.Customers += l.Customers
		switch {
		case !Unknown(l.KW):
			d.LoadKW += l.KW
			d.LoadKVAR += l.KVAR
		case len(l.EnergyKWh) > 0:
			d.LoadsByEnergy++
		default:
			d.LoadsByProfile++
		}
	}
	for i := range m.Generators {
		d.GeneratorKVA += m.Generators[i].KVA
	}
	return d
}
