package sim

import (
	"yearflow/profiles"
	"yearflow/sim/feeder"
	"yearflow/sim/network"
	"yearflow/sim/powerflow"
)

// group begins the group of an inverter.
func (in *inputs) group() int {
	law := &inverterLaw{}
	in.laws = append(in.laws, law)
	in.groups = append(in.groups, powerflow.Group{Law: law})
	return len(in.groups) - 1
}

// member makes the injection that is added next one of a group's.
func (in *inputs) member(j *powerflow.Injection, group int) {
	if group < 0 {
		return
	}
	j.Group = int32(group + 1)
	in.groups[group].Members = append(in.groups[group].Members, int32(len(in.injections)))
}

// battery adds a storage unit; its power is set at every instant.
func (in *inputs) battery(i int, b *feeder.Battery, net *network.Network, find finder, use func(*profiles.Series) int) {
	js := branches(net, b.Node, b.Connection, b.Phases, b.Pairs)
	group := -1
	if b.Function >= 0 {
		group = in.group()
	}
	in.groupOfBattery = append(in.groupOfBattery, group)
	series, scale := -1, 1.0
	if s := find(b.Profile, b.At, "pu", "kW"); s != nil {
		series = use(s)
		if s.Unit == "pu" {
			scale = b.KW
		}
	}
	in.batterySeries = append(in.batterySeries, series)
	in.batteryScale = append(in.batteryScale, scale)
	var branches []int
	for _, j := range js {
		j.PC, j.QC, j.Generator = 1, 1, true
		j.Size = b.KVA * 1000 / float64(len(js))
		in.member(&j, group)
		branches = append(branches, len(in.injections))
		in.add(j, driver{-1, -1, -1}, 0, -1, -1)
		in.batteryOf[len(in.batteryOf)-1] = i
	}
	in.batteryBranches = append(in.batteryBranches, branches)
}

// charge adds a charging point, a load of constant power that is set at every instant.
func (in *inputs) charge(i int, c *feeder.Charger, net *network.Network) {
	js := branches(net, c.Node, c.Connection, c.Phases, c.Pairs)
	var branches []int
	for _, j := range js {
		j.PC, j.QC = 1, 1
		j.Size = c.KW * 1000 / float64(len(js))
		branches = append(branches, len(in.injections))
		in.add(j, driver{-1, -1, -1}, 0, -1, -1)
		in.chargerOf[len(in.chargerOf)-1] = i
	}
	in.chargerBranches = append(in.chargerBranches, branches)
}
