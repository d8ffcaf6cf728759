package conductor_test

import (
	"fmt"
	"log"

	"yearflow/sim/conductor"
)

const (
	foot = 0.3048   // m
	mile = 1.609344 // km
)

// pick returns a conductor of the handbook.
func pick(name string) conductor.Conductor {
	conductors, _ := conductor.Handbook()
	for _, c := range conductors {
		if c.Name == name {
			return c
		}
	}
	log.Fatalf("no conductor %q", name)
	return conductor.Conductor{}
}

// A four-wire pole top (Kersting, Distribution System Modeling and Analysis, example
// 4.1): phases on the crossarm, the neutral four feet below.
func ExampleLine_Overhead() {
	at := func(x, y float64) conductor.Point { return conductor.Point{X: x * foot, Y: y * foot} }
	neutral := at(4, 25)
	line := conductor.Line{
		Frequency:        60,
		EarthResistivity: conductor.DefaultEarthResistivity,
		Phase:            []conductor.Point{at(0, 29), at(2.5, 29), at(7, 29)},
		PhaseConductor:   pick("336.4 26/7 ACSR"),
		Neutral:          &neutral,
		NeutralConductor: pick("4/0 6/1 ACSR"),
	}
	m, err := line.Overhead()
	if err != nil {
		log.Fatal(err)
	}
	for i := range m.N {
		for j := 0; j <= i; j++ {
			fmt.Printf(" %.3f ohm/mi", m.Z[i][j]*mile)
		}
		fmt.Println()
	}
	fmt.Printf(" b11 %.2f uS/mi\n", m.B[0][0]*mile*1e6)
	// Output:
	//  (0.458+1.078i) ohm/mi
	//  (0.156+0.502i) ohm/mi (0.467+1.048i) ohm/mi
	//  (0.153+0.385i) ohm/mi (0.158+0.424i) ohm/mi (0.461+1.065i) ohm/mi
	//  b11 5.68 uS/mi
}

// Three cables in a trench, six inches apart (Kersting, example 4.2).
func ExampleCableLine_ConcentricNeutral() {
	_, cables := conductor.Handbook()
	var cable conductor.Cable
	for _, c := range cables {
		if c.Name == "250 AA CN 15kV 1/3" {
			cable = c
		}
	}
	run := conductor.CableLine{
		Frequency:        60,
		EarthResistivity: 100,
		Phase:            []conductor.Point{{X: 0}, {X: 0.5 * foot}, {X: 1 * foot}},
		Cable:            cable,
		Core:             pick(cable.Conductor),
		Strand:           pick(cable.Strand),
	}
	m, err := run.ConcentricNeutral()
	if err != nil {
		log.Fatal(err)
	}
	s, _ := m.Symmetrical()
	fmt.Printf("z1 %.3f ohm/mi, z0 %.3f ohm/mi, b1 %.1f uS/mi\n", s.Z[1][1]*mile, s.Z[0][0]*mile, real(s.B[1][1])*mile*1e6)
	// Output:
	// z1 (0.487+0.415i) ohm/mi, z0 (1.411+0.466i) ohm/mi, b1 96.9 uS/mi
}

// Of a line only the sequence values are known.
func ExampleSequence() {
	m := conductor.Sequence(0.19+0.39i, 0.48+1.2i, 4.2e-6, 1.8e-6)
	fmt.Printf("self %.4f, mutual %.4f ohm/km\n", m.Z[0][0], m.Z[1][0])
	fmt.Printf("self %.2f, mutual %.2f uS/km\n", m.B[0][0]*1e6, m.B[1][0]*1e6)
	// Output:
	// self (0.2867+0.6600i), mutual (0.0967+0.2700i) ohm/km
	// self 3.40, mutual -0.80 uS/km
}

// The inverse of a single-phase lateral's impedance: g + jb of one kilometre.
func ExampleMatrices_Admittance() {
	m := conductor.Matrices{N: 1}
	m.Z[0][0] = 0.6 + 0.8i
	y, err := m.Admittance()
	fmt.Printf("%.2f S km, %v\n", y[0][0], err)
	// Output:
	// (0.60-0.80i) S km, <nil>
}

// What is wrong with a line comes in the error, all of it.
func ExampleLine_Overhead_impossible() {
	c := pick("1/0 6/1 ACSR")
	_, err := conductor.Line{
		Frequency:        60,
		EarthResistivity: 100,
		Phase:            []conductor.Point{{X: 0, Y: 9}, {X: 0, Y: 9}, {X: 2, Y: -9}},
		PhaseConductor:   c,
	}.Overhead()
	fmt.Println(err)
	// Output:
	// position 3 is at y = -29.53 ft; an overhead conductor hangs above the earth (y > 0); position 1 and position 2 are at the same place
}
