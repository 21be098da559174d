// Package demo writes Quill Ridge, an invented galaxy survey, with its truth
// and its job files. Nothing in it was observed: every object, number and
// remark comes from a random number generator with a fixed seed, so that the
// same options give the same bytes on every machine.
//
// [Write] is the way in. It simulates in the order of the light: population.go
// draws galaxies from a luminosity function and a volume, sky.go places them
// and lets dust and motions act, observe.go adds the survey's errors, plan.go
// and defects.go spoil some rows the way real catalogues are spoilt, and
// record.go and truth.go write down what the survey saw and what was there.
//
// # What is simulated
//
// The universe is the named set planck2018. Two fields:
//
//   - "main" is wide and limited in flux. Luminosities follow a Schechter
//     function, places are uniform in comoving volume for 0.005 < z < 0.6, and
//     every galaxy whose r magnitude would be brighter than [FluxLimit] without
//     dust and without noise is in the catalogue. The cut is on the noise-free
//     magnitude, so that the errors of the rows are Gaussian and no absolute
//     magnitude is biased; the job selects at 19.5, many standard deviations
//     brighter, where noise has carried galaxies across the limit both ways
//     and the sample is complete in the measured magnitude as well. So both
//     checks are honest: pulls of mean 0 and width 1 over all good rows, and
//     <V/Vmax> = 0.5 inside the job's selection. Spectra succeed at random with
//     the probability in the completeness column.
//   - "deep" has photometric redshifts, with n(z) ~ z^2 exp(-(z/0.8)^1.5),
//     some spectra, quasars up to z = 6 and a few candidates up to z = 10.7.
//     It begins at r = 20.5, so that it adds nothing to the selection of "main".
//
// Every magnitude obeys m = M + A + mu + K + e + noise, with the redshifts and
// the distance of a moving source seen by a moving observer: the catalogue's
// redshifts are heliocentric, peculiar velocities have a dispersion of 250 km/s
// and the Sun moves against the microwave background.
package demo
