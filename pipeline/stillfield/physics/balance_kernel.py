"""The heat balance of one still over one sub-step, in arithmetic that serves arrays and compiled scalars.

One source, two executions: `balance_numpy` calls these functions with arrays of cells, `balance_compiled`
compiles them for one cell and lets the processor work on several cells at once. For that there is no
exponential, no power and no Python number in here (a Python float would turn single precision into
double); constants come in `Numbers`, in the precision of the run.

Implicit midpoint rule. With w and g the water and cover temperatures at the middle of the sub-step and w0
the water at its start,

    C (w - w0) / (Δt / 2) = water_gain - q_c - q_e - q_r - U_b w
    0 = cover_gain + q_c + q_e + q_r - cover_slope g - R_A ε_g σ (g + 273.15)^4

is solved by two Newton steps from the trend of the sub-step before. The fluxes linearised at the last Newton
point and taken at its solution are *the* fluxes of the sub-step, so what leaves the water is what the
ledger counts, to rounding. Water that would cool below the freezing point stays there and turns to ice until
its heat of fusion is used up; under ice nothing evaporates.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np


class Numbers(NamedTuple):
    """Constants of a run: numbers of the formulas, of the still and of the step."""

    zero: Any
    half: Any
    one: Any
    two: Any
    three: Any
    four: Any
    eight: Any
    kelvin: Any  # 273.15
    vapour_low: Any  # ends of the range of the vapour polynomial [degC]
    vapour_high: Any
    p0: Any  # vapour_pressure**(1/8) as a polynomial of degC
    p1: Any
    p2: Any
    p3: Any
    p4: Any
    p5: Any
    p6: Any
    r0: Any  # first guess of the cube root as a polynomial of the fourth root
    r1: Any
    r2: Any
    r3: Any
    buoyancy_floor: Any  # [K]
    mean_low: Any  # ends of the range of the transfer polynomials [degC]
    mean_high: Any
    h0: Any  # k_h as a polynomial of the mean temperature [W m-2 K-4/3]
    h1: Any
    h2: Any
    h3: Any
    e0: Any  # k_e likewise [K Pa-1]
    e1: Any
    e2: Any
    e3: Any
    stefan: Any  # 1 where the flow of vapour counts, else 0
    radiation_inside: Any  # effective emittance times sigma [W m-2 K-4]
    radiation_outside: Any  # area ratio times emittance times sigma [W m-2 K-4]
    area_ratio: Any  # cover area over basin area
    wind_base: Any  # h_w = wind_base + wind_slope v
    wind_slope: Any
    loss: Any  # U_b [W m-2 K-1]
    latent_base: Any  # L = latent_base - latent_slope T [J kg-1]
    latent_slope: Any
    seconds: Any  # length of the sub-step times (1 - leak) [s]


class Cell(NamedTuple):
    """What may differ from cell to cell."""

    activity: Any  # of the brine [1]
    freezing: Any  # freezing point [degC]
    inertia: Any  # heat capacity over half a sub-step [W m-2 K-1]
    ice_limit: Any  # heat of fusion of the brine over its heat capacity [K]
    convection: Any  # k_h over that at the reference pressure [1]
    evaporation: Any  # k_e likewise [1]
    buoyancy: Any  # 2.654 p [Pa]
    pressure: Any  # p [Pa]


class Weather(NamedTuple):
    """Weather of a step as the balance needs it, per basin area."""

    water_gain: Any  # absorbed + U_b T_a [W m-2]
    cover_gain: Any  # what the cover gains with itself at 0 degC and 0 K [W m-2]
    cover_slope: Any  # area ratio times wind coefficient [W m-2 K-1]


class State(NamedTuple):
    """Memory between sub-steps."""

    water: Any  # water temperature [degC]
    change: Any  # its change over the sub-step before [K]
    cover: Any  # cover temperature at the middle of the sub-step before [degC]
    ice: Any  # heat of fusion given off, over heat capacity [K]


class Flow(NamedTuple):
    """Heat from water to cover, with its slopes against water and cover temperature."""

    convected: Any
    convected_w: Any
    convected_g: Any
    evaporated: Any
    evaporated_w: Any
    evaporated_g: Any
    radiated: Any
    radiated_w: Any
    radiated_g: Any


class Move(NamedTuple):
    """Result of the last Newton step of a sub-step."""

    flow: Flow
    water: Any  # water at the middle of the sub-step [degC]
    cover: Any  # cover likewise
    water_move: Any  # how far the last Newton step moved them [K]
    cover_move: Any
    evaporated: Any  # heat with the vapour, linearised and never negative [W m-2]


def choose(condition: Any, yes: Any, no: Any) -> Any:
    """`yes` where `condition`, else `no`."""
    return np.where(condition, yes, no)


def larger(value: Any, floor: Any) -> Any:
    """`value`, at least `floor`; not-a-number stays."""
    return np.maximum(value, floor)


def smaller(value: Any, ceiling: Any) -> Any:
    """`value`, at most `ceiling`; not-a-number stays."""
    return np.minimum(value, ceiling)


def vapour(temperature: Any, k: Numbers) -> Any:
    """Saturation pressure and its slope: eighth power of a polynomial. [Pa], [Pa K-1]."""
    t = smaller(larger(temperature, k.vapour_low), k.vapour_high)
    root = k.p6 * t + k.p5
    slope = k.p6 * t + root
    root = root * t + k.p4
    slope = slope * t + root
    root = root * t + k.p3
    slope = slope * t + root
    root = root * t + k.p2
    slope = slope * t + root
    root = root * t + k.p1
    slope = slope * t + root
    root = root * t + k.p0
    square = root * root
    seventh = square * square * square * root
    return seventh * root, k.eight * seventh * slope


def cube_root(x: Any, k: Numbers) -> Any:
    """Cube root by square roots: x^(1/4) gives x^(1/3) to 2 %, one Halley step to 1e-5."""
    fourth = np.sqrt(np.sqrt(x))
    root = ((k.r3 * fourth + k.r2) * fourth + k.r1) * fourth + k.r0
    cube = root * root * root
    return root * (cube + x + x) / (cube + cube + x)


def transfer(mean: Any, over_water: Any, over_cover: Any, cell: Cell, k: Numbers) -> Any:
    """k_h and k_e at a mean temperature; with the flow of vapour, 1/p_lm by (a + b + 4 sqrt(ab)) / 6."""
    t = smaller(larger(mean, k.mean_low), k.mean_high)
    convection = cell.convection * (((k.h3 * t + k.h2) * t + k.h1) * t + k.h0)
    evaporation = cell.evaporation * (((k.e3 * t + k.e2) * t + k.e1) * t + k.e0)
    first = larger(cell.pressure - over_water, k.one)
    second = larger(cell.pressure - over_cover, k.one)
    log_mean = k.two * np.sqrt(first * second) + k.half * (first + second)
    stefan = k.three * cell.pressure / log_mean - k.one
    return convection, evaporation * (k.one + k.stefan * stefan)


def flow(water: Any, cover: Any, ice: Any, cell: Cell, k: Numbers) -> Flow:
    """Heat from water to cover and its slopes; slopes of k_h and k_e themselves are left out."""
    pressure, slope = vapour(water, k)
    over_water = cell.activity * pressure
    over_water_w = cell.activity * slope
    over_cover, over_cover_g = vapour(cover, k)
    water_k = water + k.kelvin
    cover_k = cover + k.kelvin
    warmth = water - cover
    moisture = over_water - over_cover
    lightness = k.one / (cell.buoyancy - over_water)
    lift = moisture * water_k * lightness
    buoyancy = larger(warmth + lift, k.buoyancy_floor)
    convection, evaporation = transfer(k.half * (water + cover), over_water, over_cover, cell, k)
    h = convection * cube_root(buoyancy, k)
    h_x = choose(warmth + lift > k.buoyancy_floor, h / (k.three * buoyancy), k.zero)
    h_w = h_x * (k.one + lightness * (over_water_w * (water_k + lift) + moisture))
    h_g = -h_x * (k.one + over_cover_g * water_k * lightness)
    evaporation = choose((moisture > k.zero) & (ice <= k.zero), evaporation, k.zero)
    radiated_w = k.radiation_inside * water_k * water_k * water_k
    radiated_g = k.radiation_inside * cover_k * cover_k * cover_k
    return Flow(
        h * warmth,
        h + warmth * h_w,
        warmth * h_g - h,
        evaporation * h * moisture,
        evaporation * (h * over_water_w + moisture * h_w),
        evaporation * (moisture * h_g - h * over_cover_g),
        radiated_w * water_k - radiated_g * cover_k,
        k.four * radiated_w,
        -k.four * radiated_g,
    )


def newton(heat: Any, point: Any, state: State, weather: Weather, cell: Cell, k: Numbers) -> Any:
    """Newton step from `point` (water, cover), with `heat` and its slopes passing between them. [K], [K]."""
    between, between_w, between_g = heat
    water, cover = point
    cover_k = cover + k.kelvin
    emission_g = k.radiation_outside * cover_k * cover_k * cover_k
    a = between_w + k.loss + cell.inertia
    d = weather.cover_slope + k.four * emission_g - between_g
    excess_w = weather.water_gain - between - k.loss * water - cell.inertia * (water - state.water)
    excess_g = weather.cover_gain + between - weather.cover_slope * cover - emission_g * cover_k
    scale = k.one / (a * d + between_g * between_w)
    return (excess_w * d - between_g * excess_g) * scale, (a * excess_g + between_w * excess_w) * scale


def full_newton(f: Flow, point: Any, state: State, weather: Weather, cell: Cell, k: Numbers) -> Any:
    """Newton step with all of the flow."""
    heat = (
        f.convected + f.radiated + f.evaporated,
        f.convected_w + f.radiated_w + f.evaporated_w,
        f.convected_g + f.radiated_g + f.evaporated_g,
    )
    return newton(heat, point, state, weather, cell, k)


def dry_newton(f: Flow, point: Any, state: State, weather: Weather, cell: Cell, k: Numbers) -> Any:
    """Newton step without the vapour."""
    heat = (f.convected + f.radiated, f.convected_w + f.radiated_w, f.convected_g + f.radiated_g)
    return newton(heat, point, state, weather, cell, k)


def move(state: State, weather: Weather, cell: Cell, k: Numbers) -> Move:
    """Water and cover at the middle of a sub-step: trend, Newton, Newton.

    Where the linearised evaporation would be negative, the last step is taken again without vapour.
    """
    water = state.water + k.half * state.change
    cover = state.cover + state.change
    first = flow(water, cover, state.ice, cell, k)
    water_move, cover_move = full_newton(first, (water, cover), state, weather, cell, k)
    water = water + water_move
    cover = cover + cover_move
    f = flow(water, cover, state.ice, cell, k)
    water_move, cover_move = full_newton(f, (water, cover), state, weather, cell, k)
    evaporated = f.evaporated + f.evaporated_w * water_move + f.evaporated_g * cover_move
    water_dry, cover_dry = dry_newton(f, (water, cover), state, weather, cell, k)
    wet = evaporated > k.zero
    water_move = choose(wet, water_move, water_dry)
    cover_move = choose(wet, cover_move, cover_dry)
    evaporated = choose(wet, evaporated, k.zero * evaporated)
    return Move(f, water + water_move, cover + cover_move, water_move, cover_move, evaporated)


def after(m: Move, state: State, cell: Cell, k: Numbers) -> State:
    """State at the end of a sub-step; cold water at its freezing point turns to ice first."""
    heat = m.water + m.water - state.water - cell.freezing - state.ice
    ice = smaller(larger(-heat, k.zero), cell.ice_limit)
    water = cell.freezing + (heat + ice)
    return State(water, water - state.water, m.cover, ice)


def distilled(m: Move, k: Numbers) -> Any:
    """Distillate of a sub-step. [kg m-2]."""
    return m.evaporated * k.seconds / (k.latent_base - k.latent_slope * m.water)


def around(absorbed: Any, cover_absorbed: Any, temp_air: Any, wind: Any, temp_sky: Any, k: Numbers) -> Weather:
    """Weather of a step in the form of the balance."""
    slope = k.area_ratio * (k.wind_base + k.wind_slope * wind)
    sky_k = temp_sky + k.kelvin
    sky = k.radiation_outside * sky_k * sky_k * sky_k * sky_k
    return Weather(absorbed + k.loss * temp_air, cover_absorbed + slope * temp_air + sky, slope)


def refreshed(state: State, temp_air: Any, k: Numbers) -> State:
    """State as it was, or at air temperature where it is not a number: at the start and after a gap."""
    lost = state.water != state.water  # true for not-a-number alone
    return State(
        choose(lost, temp_air, state.water),
        choose(lost, k.zero, state.change),
        choose(lost, temp_air, state.cover),
        choose(lost, k.zero, state.ice),
    )


def ledger(m: Move, old: State, new: State, cell: Cell, k: Numbers) -> Any:
    """Fluxes of a sub-step for the record, in the order of `heat_balance.CHANNELS`."""
    f = m.flow
    cover_k = m.cover - m.cover_move + k.kelvin
    emission_g = k.radiation_outside * cover_k * cover_k * cover_k
    return (
        m.water,
        m.cover,
        f.convected + f.convected_w * m.water_move + f.convected_g * m.cover_move,
        m.evaporated,
        f.radiated + f.radiated_w * m.water_move + f.radiated_g * m.cover_move,
        emission_g * (cover_k + k.four * m.cover_move),
        k.half * cell.inertia * ((new.water - new.ice) - (old.water - old.ice)),
    )


#: Cells the compiled march carries through time together; their state stays in the first-level cache.
BLOCK_CELLS = 256


def march_cells(
    forcing: Any, cells: Any, k: Numbers, schedule: Any, daily: Any, frozen: Any, record: Any
) -> None:
    """Carry all cells through time, cell by cell: for compilation only (see `balance_compiled`).

    It stands here, beside the functions it calls, so that the compiler's cache sees every change of them.
    Arguments as in `balance_numpy.march`.
    """
    order, rows, substeps = schedule
    work = np.empty((9, BLOCK_CELLS), cells.dtype)
    for start in range(0, cells.shape[1], BLOCK_CELLS):
        count = min(BLOCK_CELLS, cells.shape[1] - start)
        work[0, :] = np.nan
        clear(work, count, k)
        for step in range(order.size):
            row = rows[step]
            enter_step(work, forcing, order[step], start, count, k)
            for _ in range(substeps):
                advance(work, cells, k, record, row, start, count)
            note_end(record, row, work, start, count)
            if step + 1 == order.size or rows[step + 1] != row:
                if row >= 0:
                    for c in range(count):
                        daily[row, start + c] = work[7, c]
                        frozen[row, start + c] = work[8, c] > k.zero
                clear(work, count, k)


def clear(work: Any, count: Any, k: Numbers) -> None:
    """Begin a new row of the result."""
    for c in range(count):
        work[7, c] = k.zero
        work[8, c] = k.zero


def enter_step(work: Any, forcing: Any, f: Any, start: Any, count: Any, k: Numbers) -> None:
    """Bring the weather of row `f` into the form of the balance; mend states lost in a gap."""
    absorbed, cover_absorbed, temp_air, wind, temp_sky = forcing
    for c in range(count):
        i = start + c
        air = temp_air[f, i]
        weather = around(absorbed[f, i], cover_absorbed[f, i], air, wind[f, i], temp_sky[f, i], k)
        state = refreshed(State(work[0, c], work[1, c], work[2, c], work[3, c]), air, k)
        work[0, c] = state.water
        work[1, c] = state.change
        work[2, c] = state.cover
        work[3, c] = state.ice
        work[4, c] = weather.water_gain
        work[5, c] = weather.cover_gain
        work[6, c] = weather.cover_slope


def advance(work: Any, cells: Any, k: Numbers, record: Any, row: Any, start: Any, count: Any) -> None:
    """One sub-step of the cells of a block: the loop in which the processor takes several cells at once."""
    for c in range(count):
        i = start + c
        old = State(work[0, c], work[1, c], work[2, c], work[3, c])
        weather = Weather(work[4, c], work[5, c], work[6, c])
        cell = Cell(
            cells[0, i], cells[1, i], cells[2, i], cells[3, i], cells[4, i], cells[5, i], cells[6, i], cells[7, i]
        )
        moved = move(old, weather, cell, k)
        new = after(moved, old, cell, k)
        work[0, c] = new.water
        work[1, c] = new.change
        work[2, c] = new.cover
        work[3, c] = new.ice
        work[7, c] += distilled(moved, k)
        work[8, c] = larger(work[8, c], new.ice)
        note(record, row, i, (moved, old, new), cell, k)


def note(record: Any, row: Any, i: Any, sub_step: Any, cell: Cell, k: Numbers) -> None:
    """Add a sub-step of cell `i` to the record; left out of the compiled code where there is none."""
    if row >= 0:
        moved, old, new = sub_step
        entries = ledger(moved, old, new, cell, k)
        for channel in range(7):
            record[channel, row, i] += entries[channel]


def note_end(record: Any, row: Any, work: Any, start: Any, count: Any) -> None:
    """Write the state at the end of a step to the record; left out of the compiled code likewise."""
    if row >= 0:
        for c in range(count):
            record[7, row, start + c] = work[0, c]
            record[8, row, start + c] = work[3, c]
