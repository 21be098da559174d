#!/usr/bin/env python3
"""High-precision reference tables for homogeneous, isotropic background cosmology.

For a list of Friedmann models (matter, curvature, photons, massless and massive
neutrinos, dark energy with w(a) = w0 + wa (1 - a)) and a list of redshifts this
script writes, with 20 significant digits,

  <model>.csv      one row per redshift: expansion rate, distances, times, volumes,
                   recession velocities, redshift drift, horizon-exit time
  scalars.csv      one row per model: age, Hubble scales, horizons, special redshifts
  models.csv       one row per model: every input parameter and the densities derived
  nu_fit_error.csv error of the massive-neutrino fitting formula (built-in set only)

Method.  Everything is an integral over u = ln(1+z) of e^u/E (comoving distance) or
1/E (time).  The u axis is cut into panels; each is integrated by Gauss-Legendre
quadrature in 45-digit arithmetic (mpmath).  The nearest complex singularities of
the integrands are ~1 away from the real u axis (for flat matter+Lambda exactly
pi/3), so a 26-node rule on a panel of width 1/4 is accurate to far more than 30
digits; '--check' repeats a sample with tanh-sinh quadrature in z and with closed
forms.  Infinite ranges are cut where the integrand is < 1e-45 of the total.
Massive neutrinos: the exact Fermi-Dirac energy integral, trapezoidal rule in
ln(momentum), which converges exponentially (error ~ exp(-pi^2/step)).

Formulae (units of the Hubble distance D_H = c/H0 and Hubble time t_H = 1/H0)
  E^2(z)   = Om x^3 + Ok x^2 + Og x^4 [1 + R_nu(x)] + Ode f(x),  x = 1+z
  f(x)     = x^(3(1+w0+wa)) exp(-3 wa z/x)           Chevallier & Polarski 2001, Linder 2003
  Og       = 8 pi G/(3 H0^2) * 4 sigma_SB Tcmb^4/c^3
  R_nu     = (7/8)(4/11)^(4/3) (Neff/N) sum_i g(m_i c^2/(k T_nu0 x)),  T_nu0 = (4/11)^(1/3) Tcmb,
             N = the number of masses listed (three zeros where none is), sharing Neff equally: a convention
  g(y)     = (120/(7 pi^4)) int_0^inf p^2 sqrt(p^2+y^2)/(e^p+1) dp
  D_C      = D_H int_0^z dz/E;  D_M = D_H S_k(D_C/D_H);  D_A = D_M/x;  D_L = D_M x
  mu       = 5 log10(D_L/10 pc)
  V_C      = closed form of Hogg 1999 (astro-ph/9905116) eq. 29, written with the angle
             chi = sqrt|Ok| D_C/D_H so that it also holds beyond the equator (chi > pi/2)
             of a closed model, where the arcsine of eq. 29 takes the wrong branch
  dV/dz    = D_H D_M^2/E per steradian
  v_now    = H0 D_C;  v_em = H(z) D_C/x;  dz/dt0 = x H0 - H(z);  dv/dt0 = c (dz/dt0)/x
  horizon  : D_C at z->inf (particle), -D_C at z->-1 (event, where it converges)
  exit     : cosmic time at which the comoving radius of the event horizon has shrunk to D_C(z)

Usage:
  make_reference.py --out DIR                 built-in models and redshifts
  make_reference.py --out DIR --spec F.json   models and redshifts from a JSON file
  make_reference.py --check                   self-checks only
"""
import argparse
import json
import os

import mpmath as mp

DPS = 45
mp.mp.dps = DPS
SIG = 20  # significant digits written

# ---- constants (SI) --------------------------------------------------------------
C = mp.mpf(299792458)                                  # m/s, exact
AU = mp.mpf(149597870700)                              # m, exact, IAU 2012 B2
PC = AU * 648000 / mp.pi                               # m, IAU 2015 B2 parsec
MPC = PC * 10**6
YR = mp.mpf(31557600)                                  # s, Julian year
GYR = YR * 10**9
GLY = C * GYR                                          # m
G = mp.mpf("6.67430e-11")                              # CODATA 2018
H_PLANCK = mp.mpf("6.62607015e-34")                    # exact (SI 2019)
K_B = mp.mpf("1.380649e-23")                           # exact
E_CH = mp.mpf("1.602176634e-19")                       # exact
SIGMA_SB = 2 * mp.pi**5 * K_B**4 / (15 * H_PLANCK**3 * C**2)   # 5.670374419...e-8
ARCSEC = mp.pi / 648000

CONST_NOTE = [
    "constants: c = 299792458 m/s (exact); au = 149597870700 m (exact); pc = au*648000/pi (IAU 2015 B2);",
    "  Julian year = 31557600 s; G = 6.67430e-11 m^3 kg^-1 s^-2 (CODATA 2018);",
    "  sigma_SB = 2 pi^5 k^4/(15 h^3 c^2) = %s W m^-2 K^-4 (SI 2019 exact h, k)" % mp.nstr(SIGMA_SB, 15),
]

BUILTIN = {
    "redshifts": ["-0.9899", "-0.9", "-0.5", "-0.01", "1e-12", "1e-9", "1e-6", "1e-5", "1e-4", "1e-3", "0.01", "0.023", "0.05", "0.1", "0.2", "0.3", "0.5",
                  "0.7", "1", "1.4", "1.5", "2", "3", "5", "7", "8", "10", "10.957", "14.32", "20", "30",
                  "100", "1000", "1089.8", "3000", "9999"],
    "models": [
        {"name": "eds", "H0": "70", "Om": "1", "Ode": "0",
         "note": "Einstein-de Sitter, no radiation"},
        {"name": "seventy_thirty", "H0": "70", "Om": "0.3", "Ode": "flat",
         "note": "flat LCDM 70/0.3/0.7, no radiation"},
        {"name": "planck2018", "H0": "67.66", "Om": "0.30964", "Ode": "flat", "Tcmb": "2.7255",
         "Neff": "3.046", "m_nu": ["0", "0", "0.06"],
         "note": "Planck 2018 results VI Table 2, TT,TE,EE+lowE+lensing+BAO; Om = (omega_b + omega_c)/h^2 = "
                 "(0.02242 + 0.11933)/0.6766^2, baryons and cold dark matter; the table's 0.3111 INCLUDES the 0.06 eV neutrino"},
        {"name": "wmap9", "H0": "69.32", "Om": "0.2865", "Ode": "flat", "Tcmb": "2.725", "Neff": "3.04",
         "note": "Hinshaw et al. 2013 (WMAP9+eCMB+BAO+H0), massless neutrinos"},
        {"name": "open", "H0": "70", "Om": "0.3", "Ode": "0", "note": "open, no dark energy, no radiation"},
        {"name": "closed", "H0": "70", "Om": "0.5", "Ode": "0.8", "note": "closed, Ok = -0.3, no radiation"},
        {"name": "closed_far", "H0": "70", "Om": "0.3", "Ode": "1.6",
         "note": "closed, Ok = -0.9, no radiation: past the equator and the antipode (dm, da, dl are absolute values there, vc the whole 3-sphere)"},
        {"name": "curved_cpl_nu", "H0": "68", "Om": "0.28", "Ode": "0.69", "w0": "-0.95", "wa": "-0.2", "Tcmb": "2.7255",
         "Neff": "3.046", "m_nu": ["0", "0.009", "0.05"], "note": "open, w0-wa, photons and massive neutrinos"},
        {"name": "wcdm", "H0": "70", "Om": "0.3", "Ode": "flat", "w0": "-0.9", "note": "flat, constant w, no radiation"},
        {"name": "cpl_a", "H0": "70", "Om": "0.3", "Ode": "flat", "w0": "-0.9", "wa": "0.1",
         "note": "flat CPL, no radiation; w falls without bound in the future: dark energy diverges, time ends after a finite span"},
        {"name": "cpl_b", "H0": "70", "Om": "0.3", "Ode": "flat", "w0": "-1.1", "wa": "-0.2",
         "note": "flat CPL, no radiation; w rises in the future, dark energy fades, matter dominates again: no event horizon"},
    ],
}


def gauss_legendre(n):
    """Nodes and weights of the n-point Gauss-Legendre rule on [-1, 1], full precision."""
    with mp.workdps(DPS + 15):
        out = []
        for i in range(n):
            x = mp.cos(mp.pi * (i + mp.mpf(3) / 4) / (n + mp.mpf(1) / 2))
            for _ in range(100):
                p0, p1 = mp.mpf(1), x
                for k in range(2, n + 1):
                    p0, p1 = p1, ((2 * k - 1) * x * p1 - (k - 1) * p0) / k
                dp = n * (x * p1 - p0) / (x * x - 1)
                dx = p1 / dp
                x -= dx
                if abs(dx) < mp.mpf(10) ** (-DPS - 8):
                    break
            p0, p1 = mp.mpf(1), x
            for k in range(2, n + 1):
                p0, p1 = p1, ((2 * k - 1) * x * p1 - (k - 1) * p0) / k
            dp = n * (x * p1 - p0) / (x * x - 1)
            out.append((+x, 2 / ((1 - x * x) * dp * dp)))
    return out


class FermiDirac:
    """g(y): energy density of a massive thermal neutrino relative to a massless one."""

    def __init__(self, step="0.1"):
        h = mp.mpf(step)
        self.p2, self.w = [], []
        norm = mp.mpf(120) / (7 * mp.pi**4)
        t = mp.mpf(-36)
        while t < mp.mpf("5.2"):
            p = mp.exp(t)
            w = norm * h * p**3 / (mp.exp(p) + 1)      # p^2 dp = p^3 dt
            if w * (p + mp.mpf(10)**-20) > mp.mpf(10) ** (-DPS - 6):
                self.p2.append(p * p)
                self.w.append(w)
            t += h

    def __call__(self, y):
        if y < mp.mpf(10)**-24:
            return mp.mpf(1)
        if y > mp.mpf(10)**24:
            return y * 180 * mp.zeta(3) / (7 * mp.pi**4)
        y2 = y * y
        s = mp.mpf(0)
        sq = mp.sqrt
        for p2, w in zip(self.p2, self.w):
            s += w * sq(p2 + y2)
        return s


def komatsu_fit(y):
    """Fitting formula of Komatsu et al. 2011 (ApJS 192, 18) eq. 26, A = 0.3173, p = 1.83."""
    p = mp.mpf("1.83")
    return (1 + (mp.mpf("0.3173") * y) ** p) ** (1 / p)


FD = None
GL = None


def setup():
    """Build the shared quadrature tables once."""
    global FD, GL
    if GL is None:
        GL = gauss_legendre(26)
        FD = FermiDirac()


class Model:
    """One background model; u = ln(1+z) throughout."""

    def __init__(self, p, nu="exact"):
        setup()
        self.name, self.note = p["name"], p.get("note", "")
        f = lambda k, d: mp.mpf(p.get(k, d))
        self.H0, self.Om = f("H0", "70"), f("Om", "0.3")
        self.w0, self.wa = f("w0", "-1"), f("wa", "0")
        self.T, self.Neff = f("Tcmb", "0"), f("Neff", "3.046")
        self.m_nu = [mp.mpf(m) for m in p.get("m_nu", [])]
        self.g = FD if nu == "exact" else komatsu_fit
        h0 = self.H0 * 1000 / MPC                       # 1/s
        self.h0 = h0
        self.DH = C / h0 / MPC                          # Mpc
        self.tH = 1 / h0 / GYR                          # Gyr
        self.Og = 8 * mp.pi * G / (3 * h0**2) * 4 * SIGMA_SB * self.T**4 / C**3
        pref = mp.mpf(7) / 8 * (mp.mpf(4) / 11) ** (mp.mpf(4) / 3)
        self.nu_massive = []                            # (mass in eV, y at z=0, count)
        if self.T == 0:
            self.nu_massless, self.nu_pref = mp.mpf(0), mp.mpf(0)
        else:
            n = len(self.m_nu) or 3
            massive = [m for m in self.m_nu if m > 0]
            per = pref * self.Neff / n
            self.nu_pref = per
            self.nu_massless = per * (n - len(massive))
            tnu = self.T * (mp.mpf(4) / 11) ** (mp.mpf(1) / 3)
            for m in sorted(set(massive)):
                self.nu_massive.append((m, m * E_CH / (K_B * tnu), massive.count(m)))
        self.Onu = self.Og * self.rnu(mp.mpf(1))
        self.Onu_massive = self.Og * (self.rnu(mp.mpf(1)) - self.nu_massless)
        if p["Ode"] == "flat":
            self.Ok = mp.mpf(0)
            self.Ode = 1 - self.Om - self.Og - self.Onu
        else:
            self.Ode = mp.mpf(p["Ode"])
            self.Ok = 1 - self.Om - self.Ode - self.Og - self.Onu
        self.width = mp.mpf(1) / 4
        self._grid()

    # -- expansion rate
    def rnu(self, x):
        """Neutrino to photon energy-density ratio at 1+z = x."""
        if self.T == 0:
            return mp.mpf(0)
        s = self.nu_massless
        for _, y0, cnt in self.nu_massive:
            s += cnt * self.nu_pref * self.g(y0 / x)
        return s

    def E(self, u):
        """H(z)/H0."""
        x = mp.exp(u)
        s = x**3 * self.Om
        if self.Ok:
            s += self.Ok * x**2
        if self.Og:
            s += self.Og * x**4 * (1 + self.rnu(x))
        if self.Ode:
            if self.wa == 0 and self.w0 == -1:
                s += self.Ode
            else:
                s += self.Ode * mp.exp(3 * (1 + self.w0 + self.wa) * u - 3 * self.wa * (1 - 1 / x))
        return mp.sqrt(s)

    def panel(self, a, b):
        """Integrals of e^u/E and 1/E over [a, b] (one panel)."""
        m, h = (a + b) / 2, (b - a) / 2
        ic = it = mp.mpf(0)
        for xn, w in GL:
            u = m + h * xn
            q = w / self.E(u)
            it += q
            ic += q * mp.exp(u)
        return ic * h, it * h

    # -- future behaviour
    def has_event_horizon(self):
        """True if int_{-1}^0 dz/E converges (dark energy wins with E^2 ~ x^n, n < 2, as x -> 0)."""
        if self.Ode <= 0:
            return False
        if self.wa > 0:
            return True
        if self.wa < 0:
            return False
        return 3 * (1 + self.w0) < 2

    def _grid(self):
        """Cumulative integrals from u = 0 on panel edges, both directions."""
        w, eps = self.width, mp.mpf(10) ** -42
        self.cum = {0: (mp.mpf(0), mp.mpf(0))}
        k, c, t = 0, mp.mpf(0), mp.mpf(0)
        while True:                                      # past
            a, b = self.panel(k * w, (k + 1) * w)
            c, t, k = c + a, t + b, k + 1
            self.cum[k] = (c, t)
            if a < eps * c and k * w > 2:
                break
        self.kmax, self.PH, self.age0 = k, c, t
        k, c, t = 0, mp.mpf(0), mp.mpf(0)
        self.EH = self.t_end = None
        stop = -20 if not self.has_event_horizon() else -10**6
        while k > stop:                                  # future
            a, b = self.panel((k - 1) * w, k * w)
            c, t, k = c - a, t - b, k - 1
            self.cum[k] = (c, t)
            if a < eps * (-c) and self.has_event_horizon():
                self.EH = -c
                if b < eps * (-t):
                    self.t_end = -t                      # finite end of time
                break
        self.kmin = k

    def ints(self, u):
        """(int e^u/E, int 1/E) from 0 to u; full relative accuracy near u = 0."""
        k = int(mp.floor(u / self.width)) if u >= 0 else int(mp.ceil(u / self.width))
        k = max(min(k, self.kmax), self.kmin)
        c, t = self.cum[k]
        a, b = self.panel(k * self.width, u)
        return c + a, t + b

    def age_int(self, u):
        """int_u^inf du/E, without cancellation at high redshift."""
        k = int(mp.ceil(u / self.width))
        if k <= 0:
            return self.age0 - self.ints(u)[1]
        s = self.panel(u, k * self.width)[1]
        tail = mp.mpf(0)
        for j in range(self.kmax, k, -1):                # smallest first
            tail += self.cum[j][1] - self.cum[j - 1][1]
        # differences of cumulative sums lose digits only far beyond the tabulated range
        return s + tail

    # -- geometry
    def Sk(self, I):
        """Transverse comoving distance / D_H."""
        if self.Ok == 0:
            return I
        r = mp.sqrt(abs(self.Ok))
        return (mp.sinh(r * I) if self.Ok > 0 else mp.sin(r * I)) / r      # signed

    def Ck(self, I):
        """Derivative of Sk."""
        if self.Ok == 0:
            return mp.mpf(1)
        r = mp.sqrt(abs(self.Ok))
        return mp.cosh(r * I) if self.Ok > 0 else mp.cos(r * I)

    def volume(self, I):
        """All-sky comoving volume / D_H^3 within comoving distance I (not past the antipode)."""
        if self.Ok == 0:
            return 4 * mp.pi / 3 * I**3
        with mp.workdps(2 * DPS + 20):                   # the closed form cancels as I^3
            r = mp.sqrt(abs(self.Ok))
            ch = r * I
            if self.Ok < 0 and ch > mp.pi:
                ch = mp.pi
            v = (mp.sinh(2 * ch) - 2 * ch) if self.Ok > 0 else (2 * ch - mp.sin(2 * ch))
            v = mp.pi * v / r**3
        return +v

    # -- inversion
    def solve(self, f, df, u):
        """Newton iteration for f(u) = 0."""
        for _ in range(200):
            d = f(u) / df(u)
            d = max(min(d, mp.mpf(1)), mp.mpf(-1))
            u -= d
            if abs(d) < mp.mpf(10) ** (-DPS + 6) * max(1, abs(u)):
                return u
        raise ArithmeticError("no convergence")

    def first_root(self, f):
        """Smallest root of f in 0.05 < u < 9 (scan, bisection, secant); None if there is none."""
        with mp.workdps(20):
            lo = mp.mpf("0.05")
            flo = f(lo)
            while True:
                hi = lo + mp.mpf("0.1")
                if hi > 9:
                    return None
                fhi = f(hi)
                if (fhi > 0) != (flo > 0):
                    break
                lo, flo = hi, fhi
            for _ in range(8):
                mid = (lo + hi) / 2
                fm = f(mid)
                if (fm > 0) == (flo > 0):
                    lo, flo = mid, fm
                else:
                    hi = mid
        return mp.findroot(f, (lo, hi), tol=mp.mpf(10) ** (-2 * DPS + 16), maxsteps=60)

    def u_of_I(self, I):
        """Invert int_0^u e^u/E = I on the panel grid (I may be negative)."""
        lo, hi = self.kmin, self.kmax
        if not (self.cum[lo][0] < I < self.cum[hi][0]):
            return None
        while hi - lo > 1:
            m = (lo + hi) // 2
            if self.cum[m][0] <= I:
                lo = m
            else:
                hi = m
        return self.solve(lambda u: self.ints(u)[0] - I, lambda u: mp.exp(u) / self.E(u), (lo + mp.mpf(1) / 2) * self.width)

    def row(self, z):
        """All tabulated quantities at redshift z."""
        z = mp.mpf(z)
        u = mp.log1p(z)
        x = 1 + z
        E = self.E(u)
        I, T = self.ints(u)
        S = self.Sk(I)
        if z > 0:
            S = abs(S)                                   # past the antipode of a closed model
        o = {"z": z, "E": E, "dc_mpc": self.DH * I, "dm_mpc": self.DH * S, "da_mpc": self.DH * S / x,
             "dl_mpc": self.DH * S * x}
        o["mu_mag"] = 5 * mp.log10(o["dl_mpc"] * 10**5) if S > 0 else None
        o["kpc_per_arcsec"] = o["da_mpc"] * 1000 * ARCSEC
        o["lookback_gyr"] = self.tH * T
        o["age_gyr"] = self.tH * self.age_int(u)
        o["vc_mpc3"] = self.DH**3 * self.volume(I)
        o["dvdz_mpc3_sr"] = self.DH**3 * S**2 / E
        o["vrec_now_c"] = I
        o["vrec_em_c"] = E * I / x
        drift = self.h0 * (x - E)
        o["zdot_per_yr"] = drift * YR
        o["vdot_cm_s_yr"] = C * 100 * drift / x * YR
        o["dprop_em_mpc"] = self.DH * I / x
        o["t_exit_gyr"] = o["z_exit"] = None
        if self.EH is not None and I > 0:
            ux = self.u_of_I(I - self.EH)
            if ux is not None:
                o["z_exit"] = mp.expm1(ux)
                o["t_exit_gyr"] = self.tH * self.age_int(ux)
        return o

    def scalars(self):
        """Model-wide numbers."""
        o = {"model": self.name, "age_now_gyr": self.tH * self.age0, "hubble_distance_mpc": self.DH,
             "hubble_time_gyr": self.tH}
        o["particle_horizon_mpc"] = self.DH * self.PH
        o["particle_horizon_gly"] = self.DH * self.PH * MPC / GLY
        eh = self.EH
        o["event_horizon_mpc"] = None if eh is None else self.DH * eh
        o["event_horizon_gly"] = None if eh is None else self.DH * eh * MPC / GLY
        o["time_left_gyr"] = self.tH * self.t_end if self.t_end is not None else mp.inf
        u = self.u_of_I(mp.mpf(1))
        o["z_vrec_now_c"] = None if u is None else mp.expm1(u)
        u = self.first_root(lambda v: self.E(v) * self.ints(v)[0] * mp.exp(-v) - 1)
        o["z_vrec_em_c"] = None if u is None else mp.expm1(u)
        u = None if eh is None else self.u_of_I(eh)
        o["z_event_horizon"] = None if u is None else mp.expm1(u)
        o["superluminal_volume_fraction"] = 1 - self.volume(mp.mpf(1)) / self.volume(self.PH)
        u = self.first_root(self._dda)
        o["z_max_da"] = None if u is None else mp.expm1(u)
        o["max_da_mpc"] = None if u is None else self.DH * self.Sk(self.ints(u)[0]) * mp.exp(-u)
        return o

    def _dda(self, u):
        I = self.ints(u)[0]
        return self.Ck(I) * mp.exp(u) / self.E(u) - self.Sk(I)

    def params(self):
        """Inputs and derived densities."""
        return {"model": self.name, "H0_km_s_mpc": self.H0, "Om": self.Om, "Ode": self.Ode, "Ok": self.Ok,
                "w0": self.w0, "wa": self.wa, "Tcmb_K": self.T, "Neff": self.Neff if self.T else None,
                "m_nu_eV": ";".join(mp.nstr(m, 6) for m in self.m_nu) if self.m_nu else "",
                "Ogamma": self.Og, "Onu": self.Onu, "Onu_massive": self.Onu_massive,
                "Om_incl_massive_nu": self.Om + self.Onu_massive}


def fmt(v):
    """20 significant digits, 'none' for undefined, 'inf' for infinite."""
    if v is None:
        return "none"
    if isinstance(v, str):
        return v
    if mp.isinf(v):
        return "inf"
    return mp.nstr(v, SIG, min_fixed=-5, max_fixed=16)


def write(path, comments, rows, cols):
    """CSV with '#' comment lines, then a header line."""
    with open(path, "w") as fh:
        for line in comments:
            fh.write("# " + line + "\n")
        fh.write(",".join(cols) + "\n")
        for r in rows:
            fh.write(",".join(fmt(r[c]) for c in cols) + "\n")


UNITS = [
    "columns: z; E = H(z)/H0; dc line-of-sight comoving, dm transverse comoving, da angular-diameter, dl luminosity distance [Mpc];",
    "  mu distance modulus [mag]; kpc_per_arcsec proper kpc per arcsec; lookback_gyr, age_gyr [Gyr];",
    "  vc_mpc3 all-sky comoving volume within z [Mpc^3]; dvdz_mpc3_sr comoving volume per unit z per steradian [Mpc^3/sr];",
    "  vrec_now_c = H0 dc/c; vrec_em_c = H(z) dc/(1+z)/c; zdot_per_yr = dz/dt0 [1/yr]; vdot_cm_s_yr = c zdot/(1+z) [cm/s/yr];",
    "  dprop_em_mpc = dc/(1+z), proper distance at emission [Mpc]; t_exit_gyr, z_exit: cosmic age and redshift at which the comoving",
    "  event horizon equals dc ('none': no event horizon, or z < 0; z_exit < 0: in the future)",
    "z < 0 rows: formal continuation of the integrals (signed), no distance modulus",
]


def run(spec, out, tag):
    """Write all tables for one specification."""
    os.makedirs(out, exist_ok=True)
    how = ["made by make_reference.py (%s): Gauss-Legendre quadrature in ln(1+z), 26 nodes per panel of width 1/4," % tag,
           "  %d-digit arithmetic (mpmath %s), %d significant digits written" % (DPS, mp.__version__, SIG)]
    scal, par = [], []
    for p in spec["models"]:
        m = Model(p)
        head = ["model %s: %s" % (m.name, m.note)]
        pr = m.params()
        head.append("  " + "; ".join("%s=%s" % (k, fmt(v)) for k, v in pr.items() if k != "model"))
        rows = [m.row(z) for z in spec["redshifts"]]
        write(os.path.join(out, m.name + ".csv"), head + how + CONST_NOTE + UNITS, rows, list(rows[0].keys()))
        scal.append(m.scalars())
        par.append(pr)
        print("done", m.name, flush=True)
    write(os.path.join(out, "scalars.csv"), how + CONST_NOTE + [
        "particle/event horizon: comoving = proper today; z_vrec_now_c: D_C = c/H0; z_vrec_em_c: H(z) D_C/(1+z) = c;",
        "z_event_horizon: D_C = event horizon today; superluminal_volume_fraction = 1 - V(c/H0)/V(particle horizon), curved where needed;",
        "time_left_gyr: finite if dark energy diverges (end of time), else inf; 'none': no such value"],
        scal, list(scal[0].keys()))
    write(os.path.join(out, "models.csv"), how + CONST_NOTE + [
        "%s: %s" % (p["name"], p.get("note", "")) for p in spec["models"]] + [
        "Om: baryons + cold dark matter (+ nothing else); Onu: all neutrinos today; Onu_massive: massive species only"],
        par, list(par[0].keys()))


def nu_table(out):
    """Error of the neutrino fitting formula against the exact integral."""
    zs = ["0", "0.1", "0.5", "1", "2", "3", "5", "10", "20", "30", "50", "100", "200", "300", "500", "1000", "1089.8", "3000", "10000"]
    rows = []
    for masses in (["0", "0", "0.06"], ["0.1", "0.1", "0.1"], ["0.5", "0.5", "0.5"]):
        p = dict(BUILTIN["models"][2])
        p["m_nu"] = masses
        a, b = Model(p), Model(p, nu="fit")
        for z in zs:
            z = mp.mpf(z)
            u = mp.log1p(z)
            ia, ib = a.ints(u)[0], b.ints(u)[0]
            na, nb = a.rnu(1 + z) - a.nu_massless, b.rnu(1 + z) - b.nu_massless
            rows.append({"m_nu_eV": ";".join(masses), "z": z, "rel_err_rho_nu_massive": nb / na - 1,
                         "rel_err_E": b.E(u) / a.E(u) - 1, "rel_err_dc": ib / ia - 1 if z else mp.mpf(0),
                         "rel_err_age": b.age_int(u) / a.age_int(u) - 1})
    write(os.path.join(out, "nu_fit_error.csv"),
          ["relative error (fit/exact - 1) of the neutrino fit of Komatsu et al. 2011 eq. 26; planck2018 parameters with the masses shown;",
           "flatness closes Ode in each case separately, so E(0) = 1 in both"], rows, list(rows[0].keys()))


def check():
    """Self-checks by other routes; prints the largest relative differences."""
    setup()
    ms = {p["name"]: p for p in BUILTIN["models"]}
    zs = [mp.mpf(z) for z in ("1e-6", "0.1", "1", "10.957", "1089.8")]
    m = Model(ms["eds"])
    print("eds  D_C closed form  ", mp.nstr(max(abs(m.ints(mp.log1p(z))[0] / (2 * (1 - 1 / mp.sqrt(1 + z))) - 1) for z in zs), 3))
    print("eds  age closed form  ", mp.nstr(max(abs(m.age_int(mp.log1p(z)) * mp.mpf(3) / 2 * (1 + z)**1.5 - 1) for z in zs), 3))
    m = Model(ms["seventy_thirty"])
    ol = m.Ode
    print("70/30 age asinh form  ", mp.nstr(max(abs(m.age_int(mp.log1p(z)) / (2 / (3 * mp.sqrt(ol)) * mp.asinh(mp.sqrt(ol / m.Om) * (1 + z)**-1.5)) - 1) for z in zs), 3))
    hyp = lambda a: 2 * mp.sqrt(a / m.Om) * mp.hyp2f1(mp.mpf(1) / 6, mp.mpf(1) / 2, mp.mpf(7) / 6, -ol / m.Om * a**3)
    print("70/30 D_C 2F1 form    ", mp.nstr(max(abs(m.ints(mp.log1p(z))[0] / (hyp(mp.mpf(1)) - hyp(1 / (1 + z))) - 1) for z in zs[1:]), 3))
    print("70/30 particle horizon", mp.nstr(abs(m.PH / hyp(mp.mpf(1)) - 1), 3))
    m = Model(ms["open"])
    mattig = lambda z: 2 * (m.Om * z + (m.Om - 2) * (mp.sqrt(1 + m.Om * z) - 1)) / (m.Om**2 * (1 + z))
    print("open D_M Mattig       ", mp.nstr(max(abs(m.Sk(m.ints(mp.log1p(z))[0]) / mattig(z) - 1) for z in zs[1:]), 3))
    for n in ("planck2018", "wmap9", "closed", "cpl_a", "cpl_b"):
        m = Model(ms[n])
        with mp.workdps(32):
            worst = mp.mpf(0)
            for z in ([mp.mpf("0.1"), mp.mpf(2)] if n == "planck2018" else zs[1:4]):
                q = mp.quad(lambda s: 1 / m.E(mp.log1p(s)), mp.linspace(0, z, 4 if z < 5 else 12))
                worst = max(worst, abs(m.ints(mp.log1p(z))[0] / q - 1))
        print("%-11s D_C tanh-sinh in z, 32 digits" % n, mp.nstr(worst, 3), flush=True)
    # exact Fermi-Dirac integral against adaptive quadrature
    with mp.workdps(30):
        worst = mp.mpf(0)
        for y in ("0.01", "1", "30", "357.9"):
            y = mp.mpf(y)
            q = mp.mpf(120) / (7 * mp.pi**4) * mp.quad(lambda p: p * p * mp.sqrt(p * p + y * y) / (mp.exp(p) + 1), [0, y / 100, y / 10, 1, 5, 20, 50, 100] if y < 10 else [0, 1, 5, 20, 50, 100])
            worst = max(worst, abs(FD(y) / q - 1))
    print("Fermi-Dirac integral, 30 digits", mp.nstr(worst, 3))


if __name__ == "__main__":
    ap = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    ap.add_argument("--out")
    ap.add_argument("--spec")
    ap.add_argument("--check", action="store_true")
    a = ap.parse_args()
    if a.check:
        check()
    if a.out:
        if a.spec:
            with open(a.spec) as fh:
                run(json.load(fh), a.out, "specification file " + os.path.basename(a.spec))
        else:
            run(BUILTIN, a.out, "built-in models")
            nu_table(a.out)
