// Package sim runs a study over time: inputs step by step, one power flow after
// another, controls acting as events in between.
//
// An Engine is made of a checked study by Prepare. It knows the network's solver,
// where each profile acts, and one control for every device. Run walks through the
// period and hands what it finds to Recorders; Solve looks at one instant.
package sim
