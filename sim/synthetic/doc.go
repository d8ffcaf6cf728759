// Package synthetic makes feeders by seeded chance, as studies, in any size: for
// measurements of speed, and for tests that want a large feeder. They describe no real
// place.
//
// A feeder is a 12.47 kV tree: a trunk of six miles with three banks of single-phase
// regulators in line and four capacitor banks, of which two follow the voltage; laterals
// of three, two and one phases hang on it, overhead and in cable, with the matrices of
// their geometry. Some of the buses are the low sides of service transformers: delta-wye,
// wye-wye, single-phase and centre-tapped. Seven in ten node.phases have a load; one load
// in ten stands between phases, three in ten follow the voltage (40 % constant impedance,
// 20 % constant current, 40 % constant power), the others draw constant power. The loads
// are scaled so that at 0.95 of their nominal power, with the regulators where their
// controls leave them, the lowest voltage of the feeder is 0.94 p.u.
//
// Every load follows one of 24 shapes: a daily curve times noise of 6 % that decays over
// ten minutes. The same options give the same bytes on the same kind of processor.
package synthetic
