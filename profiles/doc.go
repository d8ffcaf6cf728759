// Package profiles reads what changes over time: the CSV files under a study's
// profiles folder, and gives the mean of every series over every step of a run.
//
// A file's first column is `time` (ISO 8601); every other column is a series
// with its unit in the header, `houses [pu]`. Open reads all files of all blocks
// and reports all their faults together; a NewSampler lays series over an Axis;
// Sampler.Step gives the values of one step, in any order and from any number of
// goroutines.
//
// # Time
//
// An instant is an int64, nanoseconds since 1970-01-01 00:00 UTC. A step of an
// Axis and the step of a file are regular in absolute time, so a local day has
// 23, 24 or 25 hours. A stamp without an offset is read on the block's clock: of
// the hour that autumn repeats the first occurrence comes first, and a clock
// time that spring skips is a fault.
//
// # Values
//
// Without Interpolate a value holds over its interval, which begins at its stamp
// (`start`, `instant`) or ends there (`end`). With Interpolate straight lines join
// the stamps, whatever Stamped says, and the first and last value hold beyond
// them. A step gets the time-weighted mean of that function over itself. Means
// are summed in twice the working precision: a constant comes back as itself.
//
// # Repeating
//
// A series that does not cover the axis is a fault unless its block repeats it.
// Then the whole file, which must be whole local days, weeks or years long on
// the clock of its block, is laid end to end in both directions, by local clock
// time and date:
//
//   - day: n days again and again.
//   - week: n weeks again and again, so that weekdays are kept.
//   - year: the same date of another year (of n, in turn), so that weekdays are not
//     kept. 29 February reads 28 February where the file's year has none, and is
//     passed over where only the file's year has one.
//
// In the hour that autumn repeats, the same clock time is read twice; a clock
// time that spring skipped in the file reads the hour before it. Inside the time
// that the file covers its own values are read.
package profiles
