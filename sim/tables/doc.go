// Package tables reads the CSV tables of a study: strictly, with units in the
// headers, with every fault at its file, line and column, and all faults at once.
//
// A table is described by a row struct. Its fields are cells (Text, Number, Integer,
// Flag) and their tags are the whole description of the columns:
//
//	type row struct {
//		Row    tables.Row    `csv:"@"`
//		Name   tables.Text   `csv:"line" is:"key"`
//		Length tables.Number `csv:"length" unit:"km" is:"required,>0"`
//		Kind   tables.Text   `csv:"kind" words:"overhead|cable" default:"overhead"`
//	}
//
// csv is the name of the column; unit its unit inside the program (any unit of the
// same dimension is taken in the file and converted); is lists key, required, and a
// bound (>0, >=0); words are the keywords that a cell may hold; upper = "yes" turns
// a cell into capitals; default is what a blank cell means, in the unit of the tag.
//
// Read gives a Sheet; a case's sheet of the same table is laid over it by Patch, cell
// by cell; Rows decodes the outcome.
package tables
