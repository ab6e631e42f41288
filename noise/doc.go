// Package noise turns what a cell did into what its sensors reported.
//
// A Chain passes blocks of truth through the links of three channels (current,
// voltage, temperature) in one fixed order, for a reading at t:
//
//	quantise(saturate((1+gain_error)·true(t-delay) + offset + walk +
//	         offset_per_k·(T-T_ref) + noise)), then stuck, then dropout
//
// since an offset ahead of a quantiser is a different sensor from a quantiser
// ahead of an offset. T is the true cell temperature at t. Each random link of
// each channel draws from its own named stream, whatever the
// other links do, so that adding or removing one fault moves no other's
// numbers. How a run is cut into blocks moves nothing either.
//
//   - saturate: limited to ±range.
//   - quantise: round-half-to-even(v/quantum)·quantum.
//   - walk: a random walk, 0 at the first sample, with steps N(0, walk²·dt).
//   - delay: the current holds from its sample on; the voltage is linear from
//     just after one sample to just before the next, the temperature linear
//     between samples; an interval's mean current is that of the shifted
//     interval. Before t = 0 all is as at t = 0.
//   - stuck, dropout: a Markov chain of two states, one step a sample, see
//     spell. A stuck channel repeats the last reading it made when it was not
//     stuck, whether or not a dropout then lost it; stuck from the start, it
//     repeats its first.
//   - every = n: there are readings at samples 0, n, 2n, … and none between.
//
// The package never sees a state of charge, never chooses a seed and refuses
// definitions out of range instead of mending them.
package noise
