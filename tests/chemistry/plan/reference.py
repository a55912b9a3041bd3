"""Random treatment problems and their optima by SciPy.

Everything is worked out from the raw problem a second time: molar masses, protons,
the mash balance and the rows of the program are written here and not taken from the
crate. Linear steps are solved by HiGHS (scipy.optimize.linprog), the quadratic one by
Goldfarb and Idnani's method (quadprog), the fewest additions by trying every subset.

    python3 reference.py > problems.json

Constants (ionisation, malt groups) are those the crate documents with their sources.
SciPy 1.17, quadprog 0.1.14, NumPy 2.4.
"""

import itertools
import json
import math
import random
import re
import sys

import numpy as np
import quadprog
from scipy.optimize import linprog

WEIGHT = dict(H=1.008, C=12.011, N=14.007, O=15.999, Na=22.990, Mg=24.305, P=30.974,
              S=32.06, Cl=35.45, K=39.098, Ca=40.078)


def mass(formula):
    """Molar mass of a formula without brackets: element symbols and counts."""
    parts = re.findall(r"([A-Z][a-z]?)(\d*)", formula)
    return sum(WEIGHT[element] * int(count or 1) for element, count in parts)


ION_MASS = {ion: mass(formula) for ion, formula in dict(
    calcium="Ca", magnesium="Mg", sodium="Na", sulfate="SO4", chloride="Cl", phosphate="PO4",
    lactate="C3H5O3", citrate="C6H5O7", nitrate="NO3").items()}
CACO3 = 50.04345  # mg per meq

# substance: (formula with its water, ions per mol, alkalinity, carbon, role)
SUBSTANCE = {
    "gypsum": ("CaSO4H4O2", dict(calcium=1, sulfate=1), 0, 0, "salt"),
    "calcium_chloride_dihydrate": ("CaCl2H4O2", dict(calcium=1, chloride=2), 0, 0, "salt"),
    "calcium_chloride_solution": ("CaCl2", dict(calcium=1, chloride=2), 0, 0, "salt"),
    "epsom_salt": ("MgSO4H14O7", dict(magnesium=1, sulfate=1), 0, 0, "salt"),
    "sodium_chloride": ("NaCl", dict(sodium=1, chloride=1), 0, 0, "salt"),
    "sodium_sulfate": ("Na2SO4", dict(sodium=2, sulfate=1), 0, 0, "salt"),
    "sodium_bicarbonate": ("NaHCO3", dict(sodium=1), 1, 1, "base"),
    "slaked_lime": ("CaO2H2", dict(calcium=1), 2, 0, "base"),
    "lactic_acid": ("C3H6O3", dict(lactate=1), -1, 0, "acid"),
    "phosphoric_acid": ("H3PO4", dict(phosphate=1), -1, 0, "acid"),
    "hydrochloric_acid": ("HCl", dict(chloride=1), -1, 0, "acid"),
    "sulfuric_acid": ("H2SO4", dict(sulfate=1), -2, 0, "acid"),
    "citric_acid_monohydrate": ("C6H10O8", dict(citrate=1), -3, 0, "acid"),
}
LIQUID = {  # share of weight, g/mL
    "calcium_chloride_solution": (0.33, 1.317), "lactic_acid": (0.80, 1.190),
    "phosphoric_acid": (0.75, 1.579), "hydrochloric_acid": (0.28, 1.139),
    "sulfuric_acid": (0.25, 1.178),
}

R_GAS, T20, T25 = 8.314462618, 293.15, 298.15


def pk20(pk25, enthalpy, heat_capacity):
    r = R_GAS * math.log(10)
    return (pk25 + 1000 * enthalpy / r * (1 / T20 - 1 / T25)
            - heat_capacity / r * (T25 / T20 - 1 + math.log(T20 / T25)))


# anion: (protons complete in water, alkalinity destroyed per mol, pKs at 20 C)
WEAK = {
    "lactate": (0, 1, [pk20(3.86, -0.43, -173)]),
    "phosphate": (0, 1, [pk20(2.148, -8.0, -141), pk20(7.198, 3.6, -230), pk20(12.35, 16.0, -242)]),
    "citrate": (0, 3, [pk20(3.128, 4.07, -131), pk20(4.761, 2.23, -178), pk20(6.396, -3.38, -254)]),
    "sulfate": (1, 2, [pk20(1.987, -22.4, -258)]),
}


def kept(anion, ph):
    """Protons a mole of the anion holds beyond the reference level."""
    complete, destroyed, pks = WEAK[anion]
    terms = np.cumprod([1.0] + [10 ** (ph - pk) for pk in pks])
    released = complete + sum(i * t for i, t in enumerate(terms)) / sum(terms)
    return destroyed - released


def charge(ph):
    return sum(c / (1 + 10 ** (pk - ph)) for pk, c in [(4.6, 135), (6.2, 5), (6.8, 40)])


def asks(ph, settings, ions, alkalinity, carbon):
    """Acid asked for by dissolved matter (mmol, meq) at a pH, water itself left out."""
    ratio = (1 - settings["carbon_dioxide_lost"]) * 10 ** (ph - 6.3819)
    total = alkalinity - carbon * ratio / (1 + ratio)
    for anion in WEAK:
        total += ions.get(anion, 0) * kept(anion, ph)
    total -= 2 * settings["calcium_release"] * ions.get("calcium", 0)
    total -= 2 * settings["magnesium_release"] * ions.get("magnesium", 0)
    return total


def per_unit(item):
    """mg of each ion, meq of alkalinity and mmol of carbon in one g or mL."""
    formula, ions, alkalinity, carbon, _ = SUBSTANCE[item["substance"]]
    share, density = LIQUID.get(item["substance"], (1, 1))
    mmol = 1000 * share * density * item["assay"] / mass(formula)
    return ({i: mmol * n * ION_MASS[i] for i, n in ions.items()}, mmol * alkalinity, mmol * carbon)


class Model:
    """Columns: shares; g or mL per litre of liquor of each addition."""

    def __init__(self, p):
        self.p = p
        v = p["volumes"]
        self.additions = [
            (m, vessel) for m, item in enumerate(p["shelf"]) for vessel in item["vessels"]
            if item["preference"] != "avoided" and not (vessel == "sparge_liquor" and v["sparge_l"] <= 0)]
        self.s, self.j = len(p["sources"]), len(self.additions)
        self.n = self.s + self.j
        self.unit = [per_unit(p["shelf"][m]) for m, _ in self.additions]
        ph = p["spec"]["mash_ph"]["target"] - p["offset"]
        st = p["settings"]
        water = 1000 * (10 ** (ph - 14.17) - 10 ** -ph)
        row = [asks(ph, st, {i: c / ION_MASS[i] for i, c in s["ions"].items()},
                    s["alkalinity_meq_per_l"], s["carbon_mmol_per_l"]) - water for s in p["sources"]]
        for (m, vessel), (ions, alk, carbon) in zip(self.additions, self.unit):
            row.append(self.dilution(vessel, "mash")
                       * asks(ph, st, {i: c / ION_MASS[i] for i, c in ions.items()}, alk, carbon))
        self.mash = np.array(row)
        self.grist = sum(g["kg"] * g["buffering"] * (charge(g["ph"]) - charge(ph))
                         for g in p["grist"]) / v["mash_l"]
        self.lower = np.array([s["lowest"] for s in p["sources"]] + [0.0] * self.j)
        self.upper = np.array([s["highest"] for s in p["sources"]] + [100.0] * self.j)
        self.limits()
        self.windows()

    def dilution(self, vessel, seen):
        v = self.p["volumes"]
        if vessel == "liquor_tank":
            return 1.0
        if vessel == seen:
            return v["liquor_l"] / v["mash_l" if seen == "mash" else "sparge_l"]
        return 0.0

    def ion(self, ion, seen=None):
        return np.array([s["ions"].get(ion, 0) for s in self.p["sources"]]
                        + [(1 if seen is None else self.dilution(vessel, seen)) * u[0].get(ion, 0)
                           for (_, vessel), u in zip(self.additions, self.unit)])

    def alkalinity(self, seen):
        return CACO3 * np.array([s["alkalinity_meq_per_l"] for s in self.p["sources"]]
                                + [self.dilution(vessel, seen) * u[1]
                                   for (_, vessel), u in zip(self.additions, self.unit)])

    def limits(self):
        p, self.hard = self.p, []
        for ion, most in p["limits"]["ions"].items():
            scale = max(most, 10)
            self.hard.append((self.ion(ion) / scale, most / scale))
        floor = min([p["limits"]["lowest_alkalinity"]]
                    + [CACO3 * s["alkalinity_meq_per_l"] for s in p["sources"]])
        for vessel in ["liquor_tank", "sparge_liquor"]:
            if vessel == "liquor_tank" or p["volumes"]["sparge_l"] > 0:
                self.hard.append((-self.alkalinity(vessel) / CACO3, -floor / CACO3))
        for m, item in enumerate(p["shelf"]):
            if item["most"] is not None:
                row = np.array([0.0] * self.s + [float(a == m) for a, _ in self.additions])
                most = item["most"] / p["volumes"]["liquor_l"]
                self.hard.append((row / most, 1.0))

    def windows(self):
        spec, self.soft, self.taste = self.p["spec"], [], []

        def plain(row, w):
            low, high, preferred = w["low"], w["high"], w["preferred"]
            scale = max([10] + [x for x in [low, preferred, high / 2 if high is not None else None]
                                if x is not None])
            self.soft.append((w["priority"],
                              None if low is None else (row / scale, low / scale),
                              None if high is None else (row / scale, high / scale)))
            if preferred is not None:
                self.taste.append((row / scale, preferred / scale))

        for ion, w in spec["ions"].items():
            plain(self.ion(ion), w)
        if spec["mash_calcium"]:
            plain(self.ion("calcium", "mash"), spec["mash_calcium"])
        if spec["sulfate_to_chloride"]:
            w = spec["sulfate_to_chloride"]
            so4, cl = self.ion("sulfate"), self.ion("chloride")
            self.soft.append((w["priority"], ((so4 - w["low"] * cl) / 50, 0.0),
                              ((so4 - w["high"] * cl) / 50, 0.0)))
        if spec["sparge_alkalinity"] and self.p["volumes"]["sparge_l"] > 0:
            plain(self.alkalinity("sparge_liquor"), spec["sparge_alkalinity"])


PRIORITY = ["high", "middle", "low"]
HAIR = 1e-6  # optima below are nought; optima are held with so much room, relative and outright


class Steps:
    """One program: columns of the model, then a miss for each window, then p and n."""

    def __init__(self, model):
        self.m, self.w = model, len(model.soft)
        self.width = model.n + self.w + 2
        self.held = [math.inf] * self.w  # most each window may be missed
        self.sums = []                   # (row, most)
        self.acid = None                 # None: counted
        self.allowed = np.ones(model.j, bool)

    def parts(self):
        m = self.m
        pad = lambda row: np.concatenate([row, np.zeros(self.width - len(row))])
        a_eq, b_eq = [pad(np.array([1.0] * m.s))], [1.0]
        balance = pad(m.mash)
        balance[-2], balance[-1] = -1.0, 1.0
        a_eq.append(balance)
        b_eq.append(-m.grist)
        a_ub, b_ub = [pad(r) for r, _ in m.hard], [b for _, b in m.hard]
        for k, (_, low, high) in enumerate(m.soft):
            if low is not None:
                row = pad(-low[0])
                row[m.n + k] = -1.0
                a_ub.append(row)
                b_ub.append(-low[1])
            if high is not None:
                row = pad(high[0])
                row[m.n + k] = -1.0
                a_ub.append(row)
                b_ub.append(high[1])
        for row, most in self.sums:
            a_ub.append(pad(row))
            b_ub.append(most)
        upper = np.concatenate([m.upper, self.held, [math.inf, math.inf]])
        upper[m.s:m.n][~self.allowed] = 0.0
        if self.acid is not None:
            upper[-2:] = [a * (1 + HAIR) + HAIR if a > 0 else 0 for a in (self.acid, -self.acid)]
        lower = np.concatenate([m.lower, np.zeros(self.w + 2)])
        return np.array(a_eq), np.array(b_eq), np.array(a_ub), np.array(b_ub), lower, upper

    def lp(self, objective):
        a_eq, b_eq, a_ub, b_ub, lower, upper = self.parts()
        c = np.concatenate([objective, np.zeros(self.width - len(objective))])
        out = linprog(c, a_ub, b_ub, a_eq, b_eq, np.column_stack([lower, upper]), method="highs",
                      options=dict(primal_feasibility_tolerance=1e-10, dual_feasibility_tolerance=1e-10))
        return out.x if out.status == 0 else None

    def feasible(self):
        return self.lp(np.zeros(1))

    def distance(self):
        """Least distance to what is preferred, tie-break included."""
        if self.feasible() is None:
            return None
        a_eq, b_eq, a_ub, b_ub, lower, upper = self.parts()
        free = upper - lower > 1e-12
        held = np.where(free, 0.0, lower)
        ridge = np.zeros(self.width)
        ridge[: self.m.n] = 1e-4
        p = np.diag(ridge)
        q = np.zeros(self.width)
        const = 0.0
        for r, t in self.m.taste:
            r = np.concatenate([r, np.zeros(self.width - len(r))])
            p += np.outer(r, r)
            q -= 2 * t * r
            const += t * t
        f = lambda x: x @ p @ x + q @ x + const

        def reduce(a, b):
            b2 = b - a @ held
            a2 = a[:, free]
            keep = np.abs(a2).max(axis=1) > 0
            return a2[keep], b2[keep]

        e, eb = reduce(a_eq, b_eq)
        i, ib = reduce(a_ub, b_ub)
        lo, hi = lower[free], upper[free]
        bounds = [np.eye(len(lo)), -np.eye(len(lo))[np.isfinite(hi)]]
        g = np.vstack([-i] + bounds)
        h = np.concatenate([-ib, lo, -hi[np.isfinite(hi)]])
        pf, qf = p[np.ix_(free, free)], q[free] + 2 * (p @ held)[free]
        z = quadratic(pf, qf, e, eb, g, h)
        x = held.copy()
        x[free] = z
        self.last = x
        return f(x)


def quadratic(p, q, e, eb, g, h):
    """min z'Pz + q'z with E z = eb, G z >= h, by the dual active-set method of Goldfarb
    and Idnani (Math. Programming 27, 1983). Windows that may be missed have no square of
    their own; 1e-8 of one makes the method applicable."""
    small = np.where(np.diag(p) > 0, 0.0, 1e-8)
    rows = np.vstack([e, g])
    # Steps held at their optimum leave hardly any room; a few billionths more may be needed.
    for loosened in [0, 1e-10, 1e-9, 3e-9, 1e-8]:
        try:
            right = np.concatenate([eb, h - loosened])
            return quadprog.solve_qp(2 * (p + np.diag(small)), -q, rows.T.copy(), right, len(eb))[0]
        except ValueError:
            pass
    raise ArithmeticError("no optimum")


def sums(model, columns):
    row = np.zeros(model.n + len(model.soft) + 2)
    row[columns] = 1.0
    return row


def solve(p, brute_force):
    m = Model(p)
    st = Steps(m)
    acid = st.lp(sums(m, [m.n + st.w, m.n + st.w + 1]))
    if acid is None:
        return dict(possible=False)
    missing = acid[-2] - acid[-1]
    if abs(missing) < HAIR:
        missing = 0.0
    st.acid = missing
    missed = []
    for priority in PRIORITY:
        which = [m.n + k for k, (pr, _, _) in enumerate(m.soft) if pr == priority]
        if not which:
            missed.append(0.0)
            continue
        value = st.lp(sums(m, which))[which].sum()
        if value > HAIR:
            st.sums.append((sums(m, which), value * (1 + HAIR) + HAIR))
            missed.append(value)
        else:
            for k in which:
                st.held[k - m.n] = HAIR
            missed.append(0.0)
    awkward = np.array([0.0] * m.s + [float(p["shelf"][a]["preference"] == "discouraged")
                                      for a, _ in m.additions])
    discouraged = 0.0
    if awkward.any():
        discouraged = awkward @ st.lp(awkward)[: m.n]
        if discouraged > HAIR:
            st.sums.append((awkward, discouraged * (1 + HAIR) + HAIR))
        else:
            st.allowed &= awkward[m.s:] == 0
            discouraged = 0.0
    liquor = p["volumes"]["liquor_l"]
    price = np.array([s["price_per_l"] for s in p["sources"]]
                     + [p["shelf"][a]["price_per_unit"] for a, _ in m.additions])
    blend = np.array([float(s["blending"]) for s in p["sources"]] + [0.0] * m.j)
    ways = dict(
        closest_to_preferred=sided(m, st, lambda s: (0.0, s.distance())),
        least_blending_water=sided(m, st, lambda s: after(s, blend)),
        cheapest=sided(m, st, lambda s: after(s, price)),
    )
    if brute_force:
        ways["fewest_additions"] = sided(m, st, fewest)
    return dict(possible=True, acid_missing_meq=missing * p["volumes"]["mash_l"], missed=missed,
                discouraged=discouraged, ways=ways)


def after(st, objective):
    if not objective.any():
        return 0.0, st.distance()
    x = st.lp(objective)
    if x is None:
        return None, None
    value = objective @ x[: len(objective)]
    size = np.abs(objective).max()
    st.sums.append((objective / size, value / size * (1 + HAIR) + HAIR))
    distance = st.distance()
    st.sums.pop()
    return value, distance


def fewest(st):
    allowed = st.allowed.copy()
    usable = np.flatnonzero(allowed)
    best = (None, None)
    for count in range(len(usable) + 1):
        for subset in itertools.combinations(usable, count):
            st.allowed = np.zeros(st.m.j, bool)
            st.allowed[list(subset)] = True
            if st.feasible() is None:
                continue
            distance = st.distance()
            if distance is not None and (best[1] is None or distance < best[1]):
                best, last = (float(count), distance), st.last
        if best[1] is not None:
            st.last = last
            break
    st.allowed = allowed
    return best


def sided(m, st, way):
    """Acid and base in one mash only if nothing else will do."""
    value, distance = way(st)
    x = st.last
    role = [SUBSTANCE[m.p["shelf"][a]["substance"]][4] if v in ("mash", "liquor_tank") else "" for a, v in m.additions]
    used = {r for r, y in zip(role, x[m.s: m.n]) if y > 1e-6}
    if {"acid", "base"} <= used:
        best = (None, None)
        for opposed in ["base", "acid"]:
            allowed = st.allowed.copy()
            st.allowed &= np.array([r != opposed for r in role])
            if st.feasible() is not None:
                other = way(st)
                if other[1] is not None and (best[1] is None or other[0] < best[0] - HAIR
                                             or abs(other[0] - best[0]) <= HAIR and other[1] < best[1]):
                    best = other
            st.allowed = allowed
        if best[1] is not None:
            value, distance = best
    return dict(chosen_by=value, distance=distance)


def problem(rng, small):
    r = lambda lo, hi, digits=2: round(rng.uniform(lo, hi), digits)

    def water(kind):
        if kind == "permeate":
            ions = dict(calcium=r(0.5, 3), magnesium=r(0.1, 1), sodium=r(1, 8), sulfate=r(0.5, 3),
                        chloride=r(1, 8), nitrate=r(0, 2))
            alk = r(0.05, 0.3)
        elif kind == "soft":
            ions = dict(calcium=r(5, 30), magnesium=r(1, 5), sodium=r(4, 20), sulfate=r(5, 40),
                        chloride=r(5, 25), nitrate=r(0, 12))
            alk = r(0.3, 1.2)
        else:
            ions = dict(calcium=r(60, 140), magnesium=r(5, 28), sodium=r(8, 60), sulfate=r(15, 120),
                        chloride=r(12, 70), nitrate=r(0, 48))
            alk = r(2, 6)
        return dict(ions=ions, alkalinity_meq_per_l=alk, carbon_mmol_per_l=round(alk * rng.uniform(1.02, 1.12), 3))

    kinds = rng.choice([["hard"], ["soft"], ["hard", "permeate"], ["hard", "permeate"], ["hard", "soft"],
                        ["hard", "soft", "permeate"], ["soft", "permeate"], ["permeate"]])
    sources = []
    for kind in kinds:
        highest = 1.0 if len(kinds) == 1 or rng.random() < 0.5 else r(0.5, 0.95)
        lowest = 0.0 if len(kinds) == 1 or rng.random() < 0.7 else r(0.05, 0.25)
        sources.append(dict(water(kind), lowest=lowest, highest=highest, blending=kind == "permeate",
                            price_per_l={"permeate": 0.008, "soft": 0.003, "hard": 0.002}[kind]))
    if len(kinds) > 1 and sum(s["highest"] for s in sources) < 1.05:
        for s in sources:
            s["highest"] = 1.0

    usual = {"gypsum": ["liquor_tank", "mash", "kettle"], "sodium_bicarbonate": ["mash"], "slaked_lime": ["mash"],
             "hydrochloric_acid": ["liquor_tank", "sparge_liquor"], "sulfuric_acid": ["liquor_tank", "sparge_liquor"]}
    anywhere = ["liquor_tank", "mash", "sparge_liquor", "kettle"]
    names = rng.sample(list(SUBSTANCE), rng.randint(3, 6) if small else rng.randint(5, 10))
    if not any(SUBSTANCE[n][4] == "acid" for n in names) and rng.random() < 0.8:
        names[0] = "lactic_acid"
    shelf = []
    for name in names:
        vessels = usual.get(name, anywhere)
        vessels = [v for v in vessels if rng.random() < (0.55 if small else 0.8)] or vessels[:1]
        shelf.append(dict(substance=name, assay=r(0.9, 1.0, 3), vessels=vessels, step=rng.choice([1.0, 1.0, 5.0, 0.1]),
                          price_per_unit=r(0.0005, 0.01, 5), most=None if rng.random() < 0.7 else r(100, 4000, 0),
                          preference=rng.choices(["usual", "discouraged", "avoided"], [0.85, 0.1, 0.05])[0]))

    batch = rng.choice([300, 500, 1000, 2000, 5000])
    liquor = round(batch * rng.uniform(1.2, 1.6), 1)
    mash = round(liquor * rng.uniform(0.4, 0.65), 1)
    sparge = 0.0 if rng.random() < 0.1 else round((liquor - mash) * rng.choice([1.0, 0.85]), 1)
    sparge = math.floor(sparge * 10) / 10
    kg = mash / rng.uniform(2.6, 4.0)
    dark = rng.random() < 0.3
    grist = [dict(kg=round(kg * (0.8 if dark else 0.93), 1), ph=r(5.65, 5.8), buffering=r(0.9, 1.1)),
             dict(kg=round(kg * 0.07, 1), ph=r(4.8, 5.1), buffering=r(0.7, 0.9))]
    if dark:
        grist.append(dict(kg=round(kg * 0.13, 1), ph=r(4.6, 4.8), buffering=r(0.7, 0.9)))

    def window(lo, hi, preferred=True):
        low, high = round(lo), round(hi)
        w = dict(low=low, high=high, preferred=None, priority=rng.choice(PRIORITY))
        if preferred and rng.random() < 0.7:
            w["preferred"] = round(rng.uniform(low, high), 1)
        if rng.random() < 0.15:
            w["low"] = None
        return w

    ions = {}
    for ion, (a, b, width) in dict(calcium=(40, 120, 60), magnesium=(2, 15, 15), sodium=(0, 30, 60), sulfate=(20, 250, 80),
                                   chloride=(20, 150, 60)).items():
        if rng.random() < 0.8:
            lo = rng.uniform(a, b)
            ions[ion] = window(lo, lo + rng.uniform(0.2, 1.2) * width)
    low_ratio = r(0.3, 3)
    target = r(5.25, 5.5)
    spec = dict(
        ions=ions,
        mash_calcium=window(rng.uniform(40, 100), 200, False) if rng.random() < 0.5 else None,
        sulfate_to_chloride=dict(low=low_ratio, high=round(low_ratio * rng.uniform(1.2, 3), 2), preferred=None,
                                 priority=rng.choice(PRIORITY)) if rng.random() < 0.4 else None,
        sparge_alkalinity=dict(low=None, high=r(15, 60, 0), preferred=None, priority=rng.choice(PRIORITY))
        if rng.random() < 0.7 else None,
        mash_ph=dict(target=target, low=round(target - 0.1, 2), high=round(target + 0.1, 2)))
    limits = dict(ions={"nitrate": 20.0 if rng.random() < 0.15 else 50.0, "sodium": r(100, 200, 0), "lactate": r(200, 400, 0)}, lowest_alkalinity=0.0)
    if rng.random() < 0.4:
        limits["ions"]["chloride"] = 250.0
        limits["ions"]["sulfate"] = 250.0
    return dict(sources=sources, shelf=shelf, volumes=dict(liquor_l=liquor, mash_l=mash, sparge_l=sparge), grist=grist,
                settings=dict(calcium_release=0.35, magnesium_release=0.175, carbon_dioxide_lost=0.5),
                offset=rng.choice([0.0, 0.0, 0.04, -0.06]), spec=spec, limits=limits)


def main():
    rng = random.Random(20260)
    problems = []
    while len(problems) < 80:
        small = len(problems) % 2 == 0
        p = problem(rng, small)
        additions = sum(len(i["vessels"]) for i in p["shelf"] if i["preference"] != "avoided")
        p["expected"] = solve(p, brute_force=additions <= 11)
        problems.append(p)
        print(len(problems), p["expected"], file=sys.stderr)
    print("[" + ",\n".join(json.dumps(p) for p in problems) + "]")


if __name__ == "__main__":
    main()
