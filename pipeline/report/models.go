package report

import "catenrich/cosmo"

// A modelView is one cosmology and its surfaces, in words.
type modelView struct {
	Name       string
	Parameters []fact
	Age        string
	Surfaces   []surface
}

type fact struct{ What, Value string }

// A surface divides objects; the three are never the same.
type surface struct{ Name, Means, Distance, Redshift, Beyond string }

func modelViews(r *Release) (list []modelView) {
	for i, m := range r.models {
		p := m.Params()
		v := modelView{Name: r.modelName(i), Age: gyr(m.Age())}
		v.Parameters = []fact{
			{"H₀", plain(p.H0) + space + "km/s/Mpc"}, {"Ωm", number(m.OmegaM(), 5)}, {"Ωde", number(m.OmegaDE(), 5)},
		}
		if !p.Flat {
			v.Parameters = append(v.Parameters, fact{"Ωk", number(m.OmegaK(), 4)})
		}
		if p.W0 != -1 || p.Wa != 0 {
			v.Parameters = append(v.Parameters, fact{"w₀", plain(p.W0)}, fact{"wₐ", plain(p.Wa)})
		}
		v.Parameters = append(v.Parameters, fact{"age", v.Age}, fact{"Hubble time", gyr(m.HubbleTime())})
		v.Surfaces = surfaces(r, i, m)
		list = append(list, v)
	}
	return list
}

func surfaces(r *Release, i int, m *cosmo.Model) []surface {
	return []surface{
		{"Hubble sphere", "beyond it objects recede faster than light today", mpc(m.HubbleDistance()), number(m.HubbleSphereRedshift(), 4),
			r.surfaceRows(i, "superluminal_now", m.HubbleSphereRedshift())},
		{"event horizon", "a signal sent today never arrives beyond it", mpc(m.EventHorizon()), number(m.EventHorizonRedshift(), 4),
			r.surfaceRows(i, "beyond_event_horizon", m.EventHorizonRedshift())},
		{"particle horizon", "the edge of what can have been seen", mpc(m.ParticleHorizon()), "infinite", "0"},
	}
}

func gyr(v float64) string { return withUnit(number(v, 4), "Gyr") }

func mpc(v float64) string { return withUnit(number(v, 5), "Mpc") }

// withUnit adds a unit to a number that is one.
func withUnit(text, unit string) string {
	if text == "infinite" || text == "none" {
		return text
	}
	return text + space + unit
}
