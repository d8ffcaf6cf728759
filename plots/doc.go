// Package plots draws the figures of a run from its results folder alone.
//
// Every figure carries a title, one sentence on what it shows (computed from the
// data), its units, the study and its case, and a tag where the study is an invented
// one. Colours are those of Okabe and Ito (Color Universal Design, 2008); phases are
// told apart by colour and by line pattern, limits are shaded bands, time is local to
// the feeder, and what is missing is grey or a gap. Figures are drawn with gonum/plot
// behind one style (style.go, page.go, panel.go) and are the same bytes for the same
// results.
package plots
