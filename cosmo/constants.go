package cosmo

import "math"

// Constants and units. Sources: SI Brochure, 9th edition (c, h, k and e are
// exact since 2019); IAU 2012 resolution B2 (astronomical unit); IAU 2015
// resolution B2 (parsec); CODATA 2018 (G).
const (
	SpeedOfLight           = 299792.458                                                                                                                                                            // km/s, exact
	AstronomicalUnit       = 149597870700.0                                                                                                                                                        // m, exact
	Parsec                 = AstronomicalUnit * 648000 / math.Pi                                                                                                                                   // m
	JulianYear             = 31557600.0                                                                                                                                                            // s
	LightYear              = SpeedOfLight * 1000 * JulianYear                                                                                                                                      // m
	GravitationalConstant  = 6.67430e-11                                                                                                                                                           // m^3 kg^-1 s^-2, +- 2.2e-5
	planckConstant         = 6.62607015e-34                                                                                                                                                        // J s, exact
	boltzmann              = 1.380649e-23                                                                                                                                                          // J/K, exact
	electronVolt           = 1.602176634e-19                                                                                                                                                       // J, exact
	megaparsec             = 1e6 * Parsec                                                                                                                                                          // m
	metresPerSecond        = 1000 * SpeedOfLight                                                                                                                                                   // c in m/s
	hubbleToSI             = 1000 / megaparsec                                                                                                                                                     // 1/s in 1 km/s/Mpc
	gigayear               = 1e9 * JulianYear                                                                                                                                                      // s
	pi2                    = math.Pi * math.Pi                                                                                                                                                     // pi^2
	stefanBoltzmann        = 2 * pi2 * pi2 * math.Pi / 15 * boltzmann * boltzmann * boltzmann * boltzmann / (planckConstant * planckConstant * planckConstant * metresPerSecond * metresPerSecond) // W m^-2 K^-4
	radiationOverCritical  = 32 * math.Pi * GravitationalConstant * stefanBoltzmann / (3 * metresPerSecond * metresPerSecond * metresPerSecond)                                                    // Omega_gamma H0^2/T^4, in s^-2 K^-4
	fourElevenths          = 4.0 / 11
	cubeRootFourElevenths  = 0.713765855503608170672                         // (4/11)^(1/3)
	neutrinosPerPhoton     = 7.0 / 8 * fourElevenths * cubeRootFourElevenths // (7/8) (4/11)^(4/3)
	electronVoltOverKelvin = electronVolt / boltzmann                        // K/eV
)

// The redshifts a model answers for: MinRedshift < z <= MaxRedshift. Beyond
// them every quantity is NaN.
const (
	MinRedshift = -0.99
	MaxRedshift = 1e4
)
