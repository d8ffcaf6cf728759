// Package study makes documents of many runs of one study: its cases are run, one on
// each core, and what they gave is held side by side.
//
// Run runs cases or takes their results where nothing has changed; Compare makes the
// tables of the settings evaluation, Losses those of the annual loss estimate. All
// numbers come from results folders (package results), so that each can be followed to
// a file there, or from solutions of the same study (marginal losses). Nothing here
// depends on the number of workers.
package study
