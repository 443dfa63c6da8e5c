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
    third: Any
    four: Any
    eight: Any
    twelfth: Any
    kelvin: Any  # 273.15
    vapour_low: Any  # ends of the range of the vapour polynomial [degC]
    vapour_high: Any
    root: Any  # vapour pressure**(1/8) as a polynomial of degC, 7 numbers, lowest power first
    guess: Any  # first guess of the cube root as a cubic of the fourth root, 4 numbers
    buoyancy_floor: Any  # [K]
    mean_low: Any  # ends of the range of the transfer polynomials [degC]
    mean_high: Any
    convection: Any  # k_h as a cubic of the mean temperature, 4 numbers [W m-2 K-4/3]
    evaporation: Any  # k_e likewise [K Pa-1]
    stefan: Any  # True where the flow of vapour counts, else None
    radiation_inside: Any  # effective emittance times sigma [W m-2 K-4]
    radiation_outside: Any  # area ratio times emittance times sigma [W m-2 K-4]
    area_ratio: Any  # cover area over basin area
    wind_base: Any  # h_w = wind_base + wind_slope v
    wind_slope: Any
    loss: Any  # U_b [W m-2 K-1]
    absorbed_share: Any  # sunshine absorbed over that given [1]
    distilling: Any  # (1 - leak) Δt / L(T) as a cubic of degC, 4 numbers [kg W-1]


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
    root = k.root[6] * t + k.root[5]
    slope = k.root[6] * t + root
    root = root * t + k.root[4]
    slope = slope * t + root
    root = root * t + k.root[3]
    slope = slope * t + root
    root = root * t + k.root[2]
    slope = slope * t + root
    root = root * t + k.root[1]
    slope = slope * t + root
    root = root * t + k.root[0]
    square = root * root
    seventh = square * square * square * root
    return seventh * root, k.eight * seventh * slope


def cubic(coefficients: Any, x: Any) -> Any:
    """Cubic in `x`, coefficients of the lowest power first."""
    return ((coefficients[3] * x + coefficients[2]) * x + coefficients[1]) * x + coefficients[0]


def cube_root(x: Any, k: Numbers) -> Any:
    """Cube root and reciprocal, by square roots and one division.

    A cubic of x^(1/4) gives x^(1/3) to 2 %, one Halley step makes that 5e-6.
    """
    fourth = np.sqrt(np.sqrt(x))
    guess = cubic(k.guess, fourth)
    cube = guess * guess * guess
    below = cube + cube + x
    share = k.one / (below * x)
    return guess * (cube + x + x) * x * share, below * share


def transfer(mean: Any, over_water: Any, over_cover: Any, cell: Cell, k: Numbers) -> Any:
    """k_h, k_e F and 1 / (2.654 p - P_w) at a mean temperature; compiled code holds one of the two relations."""
    if k.stefan is None:
        return plain_transfer(mean, over_water, over_cover, cell, k)
    return moist_transfer(mean, over_water, over_cover, cell, k)


def plain_transfer(mean: Any, over_water: Any, over_cover: Any, cell: Cell, k: Numbers) -> Any:
    """Without the flow of vapour: k_h and k_e are constants."""
    lightness = k.one / (cell.buoyancy - over_water)
    return cell.convection * k.convection[0], cell.evaporation * k.evaporation[0], lightness


def moist_transfer(mean: Any, over_water: Any, over_cover: Any, cell: Cell, k: Numbers) -> Any:
    """k_h and k_e as cubics of the mean temperature, with the Stefan factor F = p / p_lm.

    1/p_lm is the mean of 1/p over the partial pressures of the air from water to cover, here by Gauss'
    rule of two points: within 0.2 % where they differ by a factor of 2.
    """
    t = smaller(larger(mean, k.mean_low), k.mean_high)
    convection = cell.convection * cubic(k.convection, t)
    evaporation = cell.evaporation * cubic(k.evaporation, t)
    air = cell.pressure - k.half * (over_water + over_cover)
    difference = over_water - over_cover
    square = larger(air * air - k.twelfth * difference * difference, cell.pressure)
    lift = cell.buoyancy - over_water
    share = k.one / (lift * square)
    return convection, evaporation * (cell.pressure * air * lift * share), square * share


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
    mean = k.half * (water + cover)
    convection, evaporation, lightness = transfer(mean, over_water, over_cover, cell, k)
    lift = moisture * water_k * lightness
    buoyancy = larger(warmth + lift, k.buoyancy_floor)
    root, reciprocal = cube_root(buoyancy, k)
    h = convection * root
    h_x = choose(warmth + lift > k.buoyancy_floor, h * k.third * reciprocal, k.zero)
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


class System(NamedTuple):
    """Linear equations of a Newton step: a Δw + b Δg = right_w, -c Δw + d Δg = right_g."""

    a: Any
    b: Any
    c: Any
    d: Any
    right_w: Any
    right_g: Any


def system(point: Any, state: State, weather: Weather, cell: Cell, k: Numbers) -> System:
    """Equations at `point` (water, cover) with nothing passing between the two."""
    water, cover = point
    cover_k = cover + k.kelvin
    emission_g = k.radiation_outside * cover_k * cover_k * cover_k
    return System(
        k.loss + cell.inertia,
        k.zero,
        k.zero,
        weather.cover_slope + k.four * emission_g,
        weather.water_gain - k.loss * water - cell.inertia * (water - state.water),
        weather.cover_gain - weather.cover_slope * cover - emission_g * cover_k,
    )


def passing(s: System, heat: Any, heat_w: Any, heat_g: Any) -> System:
    """The equations with `heat` more passing from water to cover."""
    return System(
        s.a + heat_w, s.b + heat_g, s.c + heat_w, s.d - heat_g, s.right_w - heat, s.right_g + heat
    )


def dry(f: Flow, s: System) -> System:
    """The equations with all of the flow but the vapour."""
    return passing(
        s, f.convected + f.radiated, f.convected_w + f.radiated_w, f.convected_g + f.radiated_g
    )


def aim(state: State, weather: Weather, cell: Cell, k: Numbers) -> Any:
    """First guess of water and cover at the middle of a sub-step: the trend and a Newton step. [degC]."""
    water = state.water + k.half * state.change
    cover = state.cover + state.change
    f = flow(water, cover, state.ice, cell, k)
    s = dry(f, system((water, cover), state, weather, cell, k))
    s = passing(s, f.evaporated, f.evaporated_w, f.evaporated_g)
    share = k.one / (s.a * s.d + s.b * s.c)
    water = water + (s.right_w * s.d - s.b * s.right_g) * share
    return water, cover + (s.a * s.right_g + s.c * s.right_w) * share


def move(point: Any, state: State, weather: Weather, cell: Cell, k: Numbers) -> Move:
    """Water and cover at the middle of a sub-step: a second Newton step, from `aim`.

    Where the linearised evaporation would be negative, the step is taken without vapour instead.
    """
    water, cover = point
    f = flow(water, cover, state.ice, cell, k)
    s_dry = dry(f, system(point, state, weather, cell, k))
    s = passing(s_dry, f.evaporated, f.evaporated_w, f.evaporated_g)
    share = k.one / (s.a * s.d + s.b * s.c)
    water_move = (s.right_w * s.d - s.b * s.right_g) * share
    cover_move = (s.a * s.right_g + s.c * s.right_w) * share
    evaporated = f.evaporated + f.evaporated_w * water_move + f.evaporated_g * cover_move
    wet = evaporated > k.zero
    share = k.one / (s_dry.a * s_dry.d + s_dry.b * s_dry.c)
    water_move = choose(wet, water_move, (s_dry.right_w * s_dry.d - s_dry.b * s_dry.right_g) * share)
    cover_move = choose(wet, cover_move, (s_dry.a * s_dry.right_g + s_dry.c * s_dry.right_w) * share)
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
    return m.evaporated * cubic(k.distilling, m.water)


def around(
    absorbed: Any, cover_absorbed: Any, temp_air: Any, wind: Any, temp_sky: Any, k: Numbers
) -> Weather:
    """Weather of a step in the form of the balance."""
    slope = k.area_ratio * (k.wind_base + k.wind_slope * wind)
    sky_k = temp_sky + k.kelvin
    sky = k.radiation_outside * sky_k * sky_k * sky_k * sky_k
    return Weather(k.absorbed_share * absorbed + k.loss * temp_air, cover_absorbed + slope * temp_air + sky, slope)


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
    """Fluxes of a sub-step for the record, in the order of `balance_records.CHANNELS`."""
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
        distilled(m, k),
    )


#: Rows of what the march carries from window to window: the fields of `State`, then the litres of the yield
#: day that has begun and the most ice on it.
CARRIED = 6
#: Cells the compiled march carries through time together; their state stays in the first-level cache.
BLOCK_CELLS = 256
#: Columns by which the rows of a block are longer, so that they do not all fall on the same lines of that cache.
SPARE = 16


def march_cells(forcing: Any, fixed: Any, walk: Any, carried: Any, results: Any) -> None:
    """Carry all cells through a window of time, cell by cell: for compilation only (see `balance_compiled`).

    It stands here, beside the functions it calls, so that the compiler's cache sees every change of them.
    Arguments as in `balance_numpy.march`.
    """
    cells, k = fixed
    record = results[2]
    work = np.empty((9, BLOCK_CELLS + SPARE), cells.dtype)
    block = np.empty((8, BLOCK_CELLS + SPARE), cells.dtype)
    for start in range(0, cells.shape[1], BLOCK_CELLS):
        count = min(BLOCK_CELLS, cells.shape[1] - start)
        work[:CARRIED, :count] = carried[:, start : start + count]
        block[:, :count] = cells[:, start : start + count]
        for step in range(walk.order.size):
            enter_step(work, forcing, walk.order[step], start, count, k)
            for _ in range(walk.substeps):
                advance(work, block, k, record, walk.notes[step], start, count)
            note_end(record, walk.notes[step], work, start, count)
            if walk.ends[step]:
                end_day(work, results, walk.rows[step], start, count, k)
        carried[:, start : start + count] = work[:CARRIED, :count]


def end_day(work: Any, results: Any, row: Any, start: Any, count: Any, k: Numbers) -> None:
    """Give the litres of a yield day as row `row` of the result, if any, and begin the next."""
    daily, frozen, _ = results
    for c in range(count):
        if row >= 0:
            daily[row, start + c] = work[4, c]
            frozen[row, start + c] = work[5, c] > k.zero
        work[4, c] = k.zero
        work[5, c] = k.zero


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
        work[6, c] = weather.water_gain
        work[7, c] = weather.cover_gain
        work[8, c] = weather.cover_slope


def advance(work: Any, block: Any, k: Numbers, record: Any, row: Any, start: Any, count: Any) -> None:
    """One sub-step of the cells of a block: the loop in which the processor takes several cells at once."""
    for c in range(count):
        old = State(work[0, c], work[1, c], work[2, c], work[3, c])
        weather = Weather(work[6, c], work[7, c], work[8, c])
        cell = Cell(
            block[0, c], block[1, c], block[2, c], block[3, c], block[4, c], block[5, c], block[6, c], block[7, c]
        )
        moved = move(aim(old, weather, cell, k), old, weather, cell, k)
        new = after(moved, old, cell, k)
        work[0, c] = new.water
        work[1, c] = new.change
        work[2, c] = new.cover
        work[3, c] = new.ice
        work[4, c] += distilled(moved, k)
        work[5, c] = larger(work[5, c], new.ice)
        note(record, row, start + c, (moved, old, new), cell, k)


def note(record: Any, row: Any, i: Any, sub_step: Any, cell: Cell, k: Numbers) -> None:
    """Add a sub-step of cell `i` to the record; left out of the compiled code where there is none."""
    if record is not None and row >= 0:
        moved, old, new = sub_step
        entries = ledger(moved, old, new, cell, k)
        for channel in range(8):
            record[channel, row, i] += entries[channel]


def note_end(record: Any, row: Any, work: Any, start: Any, count: Any) -> None:
    """Write the state at the end of a step to the record; left out of the compiled code likewise."""
    if record is not None and row >= 0:
        for c in range(count):
            record[8, row, start + c] = work[0, c]
            record[9, row, start + c] = work[3, c]
