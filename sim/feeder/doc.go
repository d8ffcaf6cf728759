// Package feeder reads a study: a folder with study.toml, the tables of a feeder and,
// if wanted, a case that is laid over them. Open returns it checked, with every fault
// of every file at once, each at its file, line and column.
//
// The outcome is a Model: every name resolved, every blank filled or listed as unknown
// (NaN), all that was assumed in Model.Assumed. Study.Warnings are the odd things that
// were met on the way, Study.Implausible is what a second pair of eyes would ask about.
//
// What is read and not modelled yet is refused with its place: centre-tapped services,
// banks of unequal units, batteries, chargers, inverter
// functions and output from weather.
package feeder
