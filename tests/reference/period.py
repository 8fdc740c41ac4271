"""Periodic steady state of one stage by numerical integration (scipy.integrate.solve_ivp), no matrix exponential.

One period runs in theta = 2 pi f t from the closing instant (-pi duty), over the opening instant
(+pi duty), to the next closing instant (2 pi - pi duty); theta = 0 is the middle of the closed interval.
"""

import numpy as np
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

METHOD, RTOL, ATOL = "DOP853", 1e-13, 1e-15   # the states are scaled so that |w|^2/2 is energy at 1 V
SETTLED = 1e-12                               # relative change from period to period that ends the settling
LONGEST_SETTLING = 400                        # periods from rest; slower stages are solved by shooting
HARMONICS = 5


def run(fun, span, start, **more):
    done = solve_ivp(fun, span, start, method=METHOD, rtol=RTOL, atol=ATOL, **more)
    if not done.success:
        raise RuntimeError(done.message)
    return done


def phases(stage):
    """(phase, from, to) in theta."""
    half = np.pi * stage.duty
    return [("closed", -half, half), ("open", half, 2 * np.pi - half)]


def period_map(stage):
    """Columns of the affine map over one period, integrated together: end = M start + b source, and
    for the choke the mean drain voltage = m start + c source."""
    n = stage.states
    columns = np.vstack([np.hstack([np.eye(n), np.zeros((n, 1))]), np.zeros((1, n + 1))])
    for phase, a, b in phases(stage):
        A, B, row = stage.A[phase], stage.B[phase], stage.drain_row

        def slope(_, y):
            Y = y.reshape(n + 1, n + 1)
            d = np.empty_like(Y)
            d[:n] = A @ Y[:n]
            d[:n, n] += B
            d[n] = row @ Y[:n]
            return d.ravel()

        columns = run(slope, (a, b), columns.ravel()).y[:, -1].reshape(n + 1, n + 1)
    mean = columns[n] / (2 * np.pi)
    return columns[:n, :n], columns[:n, n], mean[:n], mean[n]


def advance(stage, start, source):
    """The state one period later."""
    for phase, a, b in phases(stage):
        A, B = stage.A[phase], stage.B[phase] * source
        start = run(lambda _, y: A @ y + B, (a, b), start).y[:, -1]
    return start


def steady(stage, settle=True):
    """Start state, source (1 V supply: the voltage, or for a choke the current in V per load
    resistance), and a note on how they were found.

    The state is settled from rest at a source of one, period after period. Where settling takes too
    long, shooting on the integrated period map takes its place. With a choke everything is in
    proportion to its constant current, so the current follows afterwards from
    mean drain voltage + current * feed resistance = supply.
    """
    M, b, m, c = period_map(stage)
    n = stage.states
    radius = float(np.abs(np.linalg.eigvals(M)).max())
    shot = np.linalg.solve(np.eye(n) - M, b)
    state, note = shot, {"method": "shooting", "spectral_radius": radius}
    if settle and radius < SETTLED ** (1 / LONGEST_SETTLING):
        state = np.zeros(n)
        for periods in range(1, 2 * LONGEST_SETTLING):
            after = advance(stage, state, 1.0)
            change = np.linalg.norm(after - state) / np.linalg.norm(after)
            state = after
            if change < SETTLED:
                break
        else:
            raise RuntimeError("does not settle")
        note.update(method="settled from rest", periods=periods,
                    distance_to_shooting=float(np.linalg.norm(state - shot) / np.linalg.norm(shot)))
    source = 1.0 / (m @ state + c + stage.feed_ohm / stage.load_ohm) if stage.choke else 1.0
    return state * source, source, note


def peak(stage, phase, source, solution):
    """Largest drain voltage in one phase: end points and stationary points, each integrated to again."""
    n = stage.states
    A, B, row = stage.A[phase], stage.B[phase] * source, stage.drain_row
    slope_row, slope_held = row @ A, row @ B
    grid = np.unique(np.concatenate([np.linspace(a, b, 7) for a, b in zip(solution.t[:-1], solution.t[1:])]))
    values = solution.sol(grid)[:n]
    slopes = slope_row @ values + slope_held
    best = max(row @ values[:, 0], row @ values[:, -1])
    for i in np.flatnonzero((slopes[:-1] > 0) & (slopes[1:] <= 0)):
        if max(row @ values[:, i], row @ values[:, i + 1]) < best - 0.2 * abs(best):
            continue
        at = brentq(lambda t: slope_row @ solution.sol(t)[:n] + slope_held, grid[i], grid[i + 1], xtol=1e-13)
        known = np.searchsorted(solution.t, at, side="right") - 1
        state = solution.y[:n, known]
        if at > solution.t[known]:
            state = run(lambda _, y: A @ y + B, (solution.t[known], at), state).y[:, -1]
        best = max(best, row @ state)
    return best


def results(stage, settle=True):
    """Every figure of the orbit, in SI, and the note on the method."""
    state, source, note = steady(stage, settle)
    n, ron, roff, unit = stage.states, stage.closed_ohm, stage.open_ohm, stage.load_ohm
    load = stage.resistor_groups.index("load")
    S, T, drain = stage.resistor_rows, stage.resistor_held * source, stage.drain_row
    orders = np.arange(1, HARMONICS + 1)
    start = state.copy()
    feed = stage.feed_row if not stage.choke else np.zeros(n)
    feed_held = stage.feed_held * source if not stage.choke else source
    sums = np.zeros(2 * HARMONICS + 2 + len(S) + 1)   # cos, sin, drain, feed, resistor squares, drain squares
    switch_squares = {}
    peaks = {}
    for phase, a, b in phases(stage):
        A, B = stage.A[phase], stage.B[phase] * source

        def slope(theta, y):
            w = y[:n]
            r, d = S @ w + T, drain @ w
            angle = orders * theta
            return np.concatenate([A @ w + B, r[load] * np.cos(angle), r[load] * np.sin(angle),
                                   [d, feed @ w + feed_held], r * r, [d * d]])

        done = run(slope, (a, b), np.append(state, np.zeros_like(sums)), dense_output=True)
        state, part = done.y[:n, -1], done.y[n:, -1]
        sums += part
        switch_squares[phase] = part[-1] / (2 * np.pi)
        peaks[phase] = peak(stage, phase, source, done)
    means = sums / (2 * np.pi)
    volts = stage.supply_v
    phasors = 2 * volts * (means[:HARMONICS] - 1j * means[HARMONICS:2 * HARMONICS])
    supply_a = volts * means[2 * HARMONICS + 1] / unit
    supply_w = volts * supply_a
    powers = volts**2 * means[2 * HARMONICS + 2:-1] / stage.resistor_ohms
    groups = {g: float(sum(p for p, name in zip(powers, stage.resistor_groups) if name == g)) for g in ("feed", "ladder", "load")}
    if stage.choke:
        groups["feed"] = float(supply_a**2 * stage.feed_ohm)
    losses = {"switch": float(volts**2 * switch_squares["closed"] / ron),
              "open_switch": float(volts**2 * switch_squares["open"] / roff) if roff else 0.0,
              "feed": groups["feed"], "ladder": groups["ladder"]}
    output_w = abs(phasors[0]) ** 2 / (2 * unit)
    slope_end = drain @ (stage.A["open"] @ state + stage.B["open"] * source)
    note["period_residual"] = float(np.linalg.norm(state - start) / np.linalg.norm(state))
    figures = {
        "output_v": {"re": float(phasors[0].real), "im": float(phasors[0].imag)},
        "output_w": float(output_w),
        "supply_a": float(supply_a),
        "supply_w": float(supply_w),
        "efficiency": float(output_w / supply_w),
        "load_w": groups["load"],
        "losses_w": losses,
        "harmonics_v": [{"re": float(p.real), "im": float(p.imag)} for p in phasors[1:]],
        "harmonics_dbc": [float(20 * np.log10(abs(p) / abs(phasors[0]))) for p in phasors[1:]],
        "switch_peak_v": float(volts * max(peaks.values())),
        "switch_peak_a": float(volts * peaks["closed"] / ron),
        "closing_v": float(volts * drain @ state),
        "closing_slope_v_per_s": float(volts * slope_end * stage.w),
        "drain_mean_v": float(volts * means[2 * HARMONICS]),
        "energy_residual": float((supply_w - groups["load"] - sum(losses.values())) / supply_w),
    }
    return figures, note
