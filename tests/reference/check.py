"""Computes halfcell's figures again with independent general libraries and prints the greatest difference per quantity.

Given a file of rows `quantity,inputs separated by ;,ours`. Exits 1 when a difference is beyond its tolerance.
numpy, scipy: constants, least squares, roots. PyCO2SYS: carbonate system of sea water. phreeqpython (PHREEQC): speciation of fresh water.
"""
import csv
import sys
from collections import defaultdict

import gsw
import numpy as np
import phreeqpython
import PyCO2SYS
from scipy import constants, optimize

LN10_R_F = np.log(10) * constants.R / constants.physical_constants["Faraday constant"][0] * 1000


def k(t):
    return LN10_R_F * (t + constants.zero_Celsius)


def ph(mv, t, offset, slope, *_):
    # The root of the electrode's own equation, not the formula turned round.
    return optimize.brentq(lambda p: offset + slope * k(t) * (7.0 - p) - mv, -20, 40, xtol=1e-14)


def u_ph(mv, t, offset, slope, var_o, var_s, cov):
    # GUM eq. 13 with partial derivatives by central differences.
    x = np.array([mv, offset, slope, t])
    f = lambda x: 7.0 - (x[0] - x[1]) / (x[2] * k(x[3]))
    h = np.array([1e-3, 1e-3, 1e-6, 1e-3])
    d = np.array([(f(x + e) - f(x - e)) / (2 * s) for s, e in zip(h, np.diag(h))])
    v = np.diag([0.3**2, var_o, var_s, 0.2**2])
    v[1, 2] = v[2, 1] = cov
    return 2 * np.sqrt(d @ v @ d + 0.01**2)


def platinum(t, r0):
    # Callendar-Van Dusen, IEC 60751.
    c = -4.183e-12 * (t - 100) * t**3 if t < 0 else 0.0
    return r0 * (1 + 3.9083e-3 * t - 5.775e-7 * t * t + c)


def fit(*rows):
    rows = np.array(rows).reshape(-1, 3)
    x = k(25.0) * (7.0 - rows[:, 0])
    # polyfit with absolute weights; its covariance is unscaled, so the lack of fit is applied as stated: never below 1.
    (slope, offset), cov = np.polyfit(x, rows[:, 1], 1, w=1 / rows[:, 2], cov="unscaled")
    chi2 = np.sum(((rows[:, 1] - offset - slope * x) / rows[:, 2]) ** 2)
    cov = cov * max(1.0, chi2 / (len(rows) - 2))
    return offset, slope, cov[1, 1], cov[0, 0], cov[0, 1]


PHREEQC = phreeqpython.PhreeqPython()


def solution(ph, t, alk):
    return PHREEQC.add_solution({
        "units": "mmol/kgw", "temp": t, "pH": ph, "Alkalinity": alk, "Na": f"{alk} charge",
    })


def co2_fresh(ph, t, alk):
    s = solution(ph, t, alk)
    return s.species["CO2"] * 44.0095e3 * density(t)


def density(t):
    # kg/L of pure water, Kell (1975).
    return (999.83952 + t * (16.945176 + t * (-7.9870401e-3 + t * (-46.170461e-6 + t * (105.56302e-9 - t * 280.54253e-12))))) / (1 + 16.879850e-3 * t) / 1000


def co2_sea(ph, t, s, alk):
    # All inputs in one call: a call costs a tenth of a second whatever it is given.
    rho = gsw.rho_t_exact(gsw.SA_from_SP(s, 0, -30, 45), t, 0) / 1000
    lueker = (19 <= s) & (s <= 43) & (2 <= t) & (t <= 35)
    r = PyCO2SYS.sys(par1=alk * 1000 / rho, par2=ph, par1_type=1, par2_type=3, salinity=s, temperature=t, pressure=0,
                     opt_pH_scale=4, opt_k_carbonic=np.where(lueker, 10, 14), opt_k_bisulfate=1, opt_total_borate=1, opt_k_fluoride=1)
    return r["CO2"] * 44.0095e-3 * rho


def ammonia_fresh(ph, t):
    return 1 / (1 + 10 ** (0.09018 + 2729.92 / (273.2 + t) - ph))


def pkw(t):
    s = PHREEQC.add_solution({"temp": t, "pH": 7.0})
    # Almost pure water: concentrations stand for activities within 1e-4.
    return 7.0 - np.log10(s.species["OH-"])


ASK = {
    # quantity: (how to compute it, tolerance, relative?)
    "nernst_slope": (k, 1e-7, False),
    "ph": (ph, 1e-9, False),
    "u_ph": (u_ph, 1e-7, False),
    "pt100_ohm": (lambda t: platinum(t, 100.0), 1e-9, False),
    "pt1000_ohm": (lambda t: platinum(t, 1000.0), 1e-8, False),
    "pt100_c": (lambda r: optimize.brentq(lambda t: platinum(t, 100.0) - r, -100, 300, xtol=1e-12), 1e-6, False),
    "fit_offset_mv": (lambda *x: fit(*x)[0], 1e-8, False),
    "fit_slope": (lambda *x: fit(*x)[1], 1e-9, False),
    "fit_var_offset": (lambda *x: fit(*x)[2], 1e-6, True),
    "fit_var_slope": (lambda *x: fit(*x)[3], 1e-6, True),
    "fit_cov": (lambda *x: fit(*x)[4], 1e-9, False),
    # PHREEQC's own activity model and constants differ from Davies and Plummer & Busenberg: the 5 % stated as the method's own.
    "co2_fresh": (co2_fresh, 0.05, True),
    # Density by another equation of state is worth 1e-4.
    "co2_sea": (co2_sea, 1e-3, True),
    "ammonia_fresh": (ammonia_fresh, 1e-12, True),
    "pkw": (pkw, 0.02, False),
}


AT_ONCE = {"co2_sea"}


def main():
    rows = defaultdict(list)
    for quantity, inputs, ours in csv.reader(open(sys.argv[1])):
        rows[quantity].append(([float(x) for x in inputs.split(";")], float(ours)))
    bad = set(rows) != set(ASK)
    print(f"{sum(map(len, rows.values()))} inputs compared")
    for quantity, (ask, tolerance, relative) in ASK.items():
        given = [inputs for inputs, _ in rows[quantity]]
        ours = np.array([figure for _, figure in rows[quantity]])
        theirs = np.array(ask(*np.array(given).T) if quantity in AT_ONCE else [ask(*x) for x in given])
        off = np.abs(ours - theirs) / (np.abs(theirs) if relative else 1.0)
        worst = int(np.argmax(off))
        within = bool(np.all(off <= tolerance))
        bad |= not within
        kind = "relative" if relative else "absolute"
        print(f"{quantity:15} {len(ours):5} inputs, greatest {kind} difference {off[worst]:.3g}, allowed {tolerance:g}"
              + ("" if within else f": TOO MUCH, at {given[worst]}"))
    sys.exit(bad)


main()
