#!/usr/bin/env python3
"""Recomputes a published run from its raw facts and its inputs block alone.

    python3 recompute.py run.json

Uses nothing but Python's standard library, shares no code with tenthmark, and takes its
derivatives numerically, so that it is a second opinion and no copy. It prints the
largest differences and ends with 1 when one is larger than it should be:
1e-6 mL in a volume, 1e-7 mL in a point of the curve, 1e-6 of a covariance entry.
"""
import json
import math
import sys


def water_kg_m3(t, p_hpa, formula):
    # Tanaka et al., Metrologia 38 (2001) 301
    rho = 999.974950 * (1 - (t - 3.983035) ** 2 * (t + 301.797) / (522528.9 * (t + 69.34881)))
    if formula == "tanaka-2001-air-saturated":
        rho += -4.612e-3 + 0.106e-3 * t
    elif formula != "tanaka-2001":
        raise SystemExit(f"this script does not know the water formula {formula}")
    kappa = (50.74 - 0.326 * t + 0.00416 * t * t) * 1e-11
    return rho * (1 + kappa * (p_hpa * 100 - 101325))


def air_kg_m3(t, p_hpa, h_pct, co2, formula):
    # CIPM-2007: Picard et al., Metrologia 45 (2008) 149
    if formula != "cipm-2007":
        raise SystemExit(f"this script does not know the air formula {formula}")
    T, p, h = t + 273.15, p_hpa * 100, h_pct / 100
    ma = (28.96546 + 12.011 * (co2 - 0.0004)) * 1e-3
    psv = math.exp(1.2378847e-5 * T * T - 1.9121316e-2 * T + 33.93711047 - 6.3431645e3 / T)
    x = h * (1.00062 + 3.14e-8 * p + 5.6e-7 * t * t) * psv / p
    z = (1 - p / T * (1.58123e-6 - 2.9331e-8 * t + 1.1043e-10 * t * t + (5.707e-6 - 2.051e-8 * t) * x
                      + (1.9898e-4 - 2.376e-6 * t) * x * x) + (p / T) ** 2 * (1.83e-11 - 0.765e-8 * x * x))
    return p * ma / (z * 8.314472 * T) * (1 - x * (1 - 18.01528e-3 / ma))


def volume_mL(x, inp):
    """x: before, after, water, air, pressure, humidity and the relative or absolute
    deviations of what the run shares."""
    rw = water_kg_m3(x["water"] + x["thermometer"], x["pressure"], inp["water_density"]) * (1 + x["water_rel"])
    ra = air_kg_m3(x["air"], x["pressure"], x["humidity"], inp["co2_fraction"], inp["air_density"]) * (1 + x["air_rel"])
    m = (x["after"] - x["before"]) * (1 + x["sensitivity"])
    v = 1000 * m / (rw - ra) * (1 - ra / (inp["weight_density_kg_m3"] + x["weights"]))
    t = x["water"] + x["thermometer"] - inp["reference_temp_C"]
    return v * (1 - inp["expansion_per_C"] * (1 + x["expansion"]) * t)


def slope(x, key, step, inp):
    up, down = dict(x), dict(x)
    up[key] += step
    down[key] -= step
    return (volume_mL(up, inp) - volume_mL(down, inp)) / (2 * step)


COMMON = [("thermometer", "u_thermometer_C", 1e-2), ("air", "u_air_temp_C", 1e-2), ("pressure", "u_pressure_hPa", 1e-1),
          ("humidity", "u_humidity_pct", 1e-1), ("water_rel", "u_water_density_rel", 1e-5), ("air_rel", "u_air_density_rel", 1e-3),
          ("expansion", "u_expansion_rel", 1e-1), ("sensitivity", "u_sensitivity_rel", 1e-4),
          ("weights", "u_weight_density_kg_m3", 1.0)]


def hat_row(points, v):
    row, left = [0.0] * len(points), 0.0
    for k, right in enumerate(points):
        if v <= right:
            share = (v - left) / (right - left)
            row[k] += share
            if k:
                row[k - 1] += 1 - share
            return row
        left = right
    raise SystemExit(f"the reading {v} lies beyond the curve")


def solve(a, b):
    """Gauss with pivoting; b is a matrix."""
    n = len(a)
    m = [list(r) + list(s) for r, s in zip(a, b)]
    for i in range(n):
        p = max(range(i, n), key=lambda r: abs(m[r][i]))
        m[i], m[p] = m[p], m[i]
        for r in range(n):
            if r != i and m[r][i]:
                f = m[r][i] / m[i][i]
                m[r] = [x - f * y for x, y in zip(m[r], m[i])]
    return [[x / m[i][i] for x in m[i][n:]] for i in range(n)]


def mul(a, b):
    bt = list(zip(*b))
    return [[sum(x * y for x, y in zip(r, c)) for c in bt] for r in a]


def main(path):
    run = json.load(open(path, encoding="utf-8"))
    inp, ambient = run["inputs"], {a["fact"]: a for a in run["ambient"]}
    points = [p["reading_mL"] for p in run["curve"]["points"]]
    rows, y, shares, common, worst_v = [], [], [], [], 0.0
    for d in run["deliveries"]:
        if d["void"]:
            continue
        air = ambient[d["ambient"]["fact"]]
        x = {"before": float(d["before"]["mass_g"]), "after": float(d["after"]["mass_g"]), "water": float(d["water_temp"]["water_temp_C"]),
             "air": float(air["air_temp_C"]), "pressure": float(air["pressure_hPa"]), "humidity": float(air["humidity_pct"]),
             **{k: 0.0 for k in ("thermometer", "water_rel", "air_rel", "expansion", "sensitivity", "weights")}}
        start, end, v = float(d["start_reading"]["reading_mL"]), float(d["end_reading"]["reading_mL"]), volume_mL(x, inp)
        worst_v = max(worst_v, abs(v - d["volume_20C_mL"]))
        rows.append([b - a for a, b in zip(hat_row(points, start), hat_row(points, end))])
        y.append(v - (end - start))
        shares.append({("mass", d["before"]["fact"]): slope(x, "before", 1e-3, inp) * inp["u_weighing_g"],
                       ("mass", d["after"]["fact"]): slope(x, "after", 1e-3, inp) * inp["u_weighing_g"],
                       ("reading", d["start_reading"]["fact"]): inp["u_reading_mL"], ("reading", d["end_reading"]["fact"]): -inp["u_reading_mL"],
                       ("water", d["water_temp"]["fact"]): slope(x, "water", 1e-2, inp) * inp["u_water_temp_C"],
                       ("delivery", d["delivery"]): inp["u_delivery_mL"]})
        common.append([slope(x, key, step, inp) * inp[u] for key, u, step in COMMON])
    n = len(y)
    birge2 = run["curve"]["birge"] ** 2
    cov = [[birge2 * sum(s * shares[j].get(k, 0) for k, s in shares[i].items()) + sum(a * b for a, b in zip(common[i], common[j]))
            for j in range(n)] for i in range(n)]
    weighted = solve(cov, [r + [v] for r, v in zip(rows, y)])
    va, vy = [r[:-1] for r in weighted], [[r[-1]] for r in weighted]
    at = list(map(list, zip(*rows)))
    normal = mul(at, va)
    p = len(points)
    inverse = solve(normal, [[float(i == j) for j in range(p)] for i in range(p)])
    curve = mul(inverse, mul(at, vy))
    worst_c = max(abs(c[0] - q["correction_mL"]) for c, q in zip(curve, run["curve"]["points"]))
    worst_s = max(abs(a / b - 1) for r, s in zip(inverse, run["curve"]["covariance_mL2"]) for a, b in zip(r, s))
    print(f"{n} deliveries, {p} points: volume within {worst_v:.1e} mL, curve within {worst_c:.1e} mL, covariance within {worst_s:.1e}")
    return 0 if worst_v <= 1e-6 and worst_c <= 1e-7 and worst_s <= 1e-6 else 1


if __name__ == "__main__":
    sys.exit(main(sys.argv[1]))
