package frame

import "catenrich/internal/exact"

// Ratios fills obs with (1+z_obs)/(1+z_cos) and frame with
// (1+z_frame)/(1+z_cos): 1 exactly where the redshifts are equal. They are what
// distances, selection limits and errors need of the other two redshifts.
func Ratios(obs, frame, zobs, zframe, zcos []float64) {
	frame, zobs, zframe, zcos = frame[:len(obs)], zobs[:len(obs)], zframe[:len(obs)], zcos[:len(obs)]
	for i := range obs {
		x := 1 + zcos[i]
		obs[i] = (1 + zobs[i]) / x
		frame[i] = (1 + zframe[i]) / x
	}
}

// AngularDiameterDistances fills da with
//
//	D_A = D_M(z_cos) (1+z_frame)/[(1+z_cos)(1+z_obs)]
//
// (Davis et al. 2011, ApJ 741, 67; Calcino & Davis 2017), in the unit of the
// transverse comoving distances dm. Ratios are those of [Ratios]; nil: 1.
func AngularDiameterDistances(da, dm, zcos, obs, frame []float64) {
	dm, zcos = dm[:len(da)], zcos[:len(da)]
	for i := range da {
		da[i] = dm[i] / (1 + zcos[i])
		if obs != nil {
			da[i] *= frame[i] / obs[i]
		}
	}
}

// LuminosityDistances fills dl with D_L = (1+z_obs)² D_A, the reciprocity
// relation (Etherington 1933), in the unit of dm.
func LuminosityDistances(dl, dm, zcos, obs, frame []float64) {
	dm, zcos = dm[:len(dl)], zcos[:len(dl)]
	for i := range dl {
		dl[i] = dm[i] * (1 + zcos[i])
		if obs != nil {
			dl[i] *= frame[i] * obs[i]
		}
	}
}

// ModulusShifts fills shift with the magnitudes by which the other redshifts
// move the distance modulus of (1+z_cos) D_M: 5 log10 of both ratios.
func ModulusShifts(shift, obs, frame []float64) {
	obs, frame = obs[:len(shift)], frame[:len(shift)]
	for i := range shift {
		shift[i] = obs[i] * frame[i]
	}
	exact.Log10Slice(shift, shift)
	for i := range shift {
		shift[i] *= 5
	}
}
