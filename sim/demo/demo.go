// Package demo holds the demonstration study that the program carries along: a
// year of Quillwater 1204, an invented 12.47 kV feeder in an invented high-plains
// town.
//
// The street plan, the services and the profiles are written by the seeded
// generator in sim/demo/generate; run it from the top of the module with
//
//	go run ./sim/demo/generate
//
// The settings sheets, study.toml and the cases are kept by hand. Nothing here
// describes a real place: the numbers are those that a planning engineer would
// expect of such a feeder.
package demo

import (
	"embed"
	"io/fs"
)

//go:embed all:study
var files embed.FS

// Study returns the demonstration study, rooted at its folder: study.toml stands
// at the top.
func Study() fs.FS {
	sub, err := fs.Sub(files, "study")
	if err != nil {
		panic("demo: " + err.Error()) // only for an invalid path, and this one is constant
	}
	return sub
}
