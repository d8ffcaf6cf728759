// Package klu holds the yardstick of speed: the fixed-point iteration of package
// powerflow as a good programmer would write it in C with a general-purpose sparse
// solver, KLU of SuiteSparse (Davis and Palamadai Natarajan, Algorithm 907: KLU, ACM
// Transactions on Mathematical Software 37(3), 2010). Nothing else uses it.
//
// It needs cgo, a C compiler and the library (Debian: libsuitesparse-dev), and is built
// under the tag klu alone:
//
//	go test -tags klu ./sim/powerflow/klu
//	go test -tags klu -run '^$' -bench . -benchtime 15x ./sim/powerflow/klu
//
// The benchmark lets every contestant run the same steps of the synthetic feeders S, M
// and L in turns within one process, and reports for each the median time a step, the
// iterations a step, and the median over the rounds of KLU's time over its own: above
// one is faster than KLU. Times are those of the thread, not of the clock on the wall.
//
// All start from the same voltages, take each step from the solution of the one before,
// and stop where no voltage has moved by more than the tolerance. In C: one
// factorisation for the state of the devices; in an iteration the currents of all
// injections, one klu_z_solve with one right-hand side, the change. KLU runs without its
// row scaling, which makes it faster by a tenth and more than with its defaults.
// Compiled with -O3 -march=native; the library is the distribution's.
package klu
