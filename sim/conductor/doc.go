// Package conductor computes the line constants of overhead lines and cables:
// the series impedance with earth return and the shunt susceptance, per
// kilometre, by position, with every neutral reduced.
//
// The method is that of W. H. Kersting, Distribution System Modeling and
// Analysis, chapters 4 and 5: Carson's equations with the first terms of the
// series for the earth's part, Kron's reduction of grounded neutrals, potential
// coefficients above a conducting plane for the shunt part, and each cable's
// neutral or shield as a conductor of its own. The constants are those of the SI,
// not the rounded ones of the printed examples.
//
// Left out: skin effect beyond what a conductor's resistance already holds,
// proximity effect, sag (a height is the one given), neutrals that are not
// grounded along the line, and the shunt capacitance of triplex.
//
// Lengths are in metres, resistances in ohm/km, susceptances in S/km. A handbook
// of bare conductors and of 15 kV cables is built in.
package conductor
