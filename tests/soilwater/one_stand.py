"""One stand, one day, in plain Python: a slow transcription that the fast day step is held against.

The balance is written from FAO Irrigation and Drainage Paper 56 (chapters 6 to 8 and 11) equation by equation, without
sight of the fast code. The irrigation rule, need and days to stress were added later with the fast code known, so they
check its arithmetic but are not an independent reading. Where the paper is silent (roots at the day's start, the part
left dry, days to stress from the day's end and at no less than 0.01 mm/d) the package's documented conventions were
taken over, also later. Plain floats and `if`; nothing is shared with the package.
"""

from __future__ import annotations

from dataclasses import dataclass, replace


@dataclass
class Ground:
    """What does not change from day to day. Water contents m3/m3, depths m, water mm."""

    theta_fc: float
    theta_wp: float
    ze: float
    rew: float
    available_mm_m: float
    p_table: float
    curve_number: float
    residue: float
    fw_method: float
    drip: bool
    profile_depth: float
    uptake: bool = False


@dataclass
class Store:
    """What is carried from day to day."""

    de: float
    dr: float
    ds: float
    zr: float
    fw: float
    de_dry: float
    snow: float
    few: float


@dataclass
class Weather:
    """One day. mm, degrees Celsius, dimensionless coefficients."""

    eto: float
    precipitation: float
    t_mean: float
    kcb: float
    kc_max: float
    cover: float
    zr: float
    irrigation: float = 0.0
    rise: float = 0.0
    melt_factor: float = 4.0


def tew(g: Ground) -> float:
    """Eq. 73."""
    return 1000.0 * (g.theta_fc - 0.5 * g.theta_wp) * g.ze


def snow_balance(snow: float, precipitation: float, t_mean: float, factor: float) -> tuple[float, float, float]:
    """Liquid water today, of it melt, and the snow left."""
    if t_mean < 0.0:
        return 0.0, 0.0, snow + precipitation
    melt = min(snow, factor * t_mean)
    return precipitation + melt, melt, snow - melt


def curve_number_today(g: Ground, de: float) -> float:
    """Curve number by the wetness of the surface: III when wet, I when dry, linear between them through II."""
    one = g.curve_number / (2.281 - 0.01281 * g.curve_number)
    three = g.curve_number / (0.427 + 0.00573 * g.curve_number)
    wet = 0.5 * g.rew
    dry = 0.7 * g.rew + 0.3 * tew(g)
    if de <= wet:
        return three
    if de >= dry:
        return one
    middle = 0.5 * (wet + dry)
    if de <= middle:
        return three + (g.curve_number - three) * (de - wet) / (middle - wet)
    return g.curve_number + (one - g.curve_number) * (de - middle) / (dry - middle)


def runoff(precipitation: float, curve_number: float) -> float:
    """NEH-630 chapter 10, metric."""
    s = 25400.0 / curve_number - 254.0
    if precipitation <= 0.2 * s:
        return 0.0
    return (precipitation - 0.2 * s) ** 2 / (precipitation + 0.8 * s)


def exposed_and_wetted(cover: float, fw: float, drip: bool) -> float:
    """Eq. 75; under a drip line the wetted fraction shrinks with cover (text below eq. 75)."""
    if drip and fw < 1.0:
        few = min(1.0 - cover, (1.0 - 2.0 / 3.0 * cover) * fw)
    else:
        few = min(1.0 - cover, fw)
    return max(few, 0.01)


@dataclass
class Scheme:
    """An irrigation rule. Shares 0-1, water mm."""

    start_below: float
    late_depletion: float
    fill_to: float
    least: float
    most: float
    interval: float
    capacity: float
    room: float
    limit: float


def rule_net(
    r: Scheme,
    dr: float,
    taw: float,
    raw: float,
    since: float,
    pumped: float,
    efficiency: float,
    open_: bool,
    late: bool,
) -> float:
    """Net depth that a rule brings today, decided on the root zone's depletion at the day's start."""
    if not open_ or since < r.interval:
        return 0.0
    allowed = r.late_depletion * taw if late else (1.0 - r.start_below) * raw
    if dr < allowed:
        return 0.0
    unfilled = max((1.0 - r.fill_to) * taw, r.room)
    gross = min(r.capacity * max(r.interval, 1.0), r.limit - pumped)
    depth = min(dr - unfilled, r.most, efficiency * gross)
    if depth < r.least or depth <= 0.0:
        return 0.0
    return depth


def need(dr: float, room: float, open_: bool) -> float:
    """Net depth that would fill the root zone but for the room kept for rain; nothing outside the window."""
    if not open_ or dr <= room:
        return 0.0
    return dr - room


def days_to_stress(raw: float, d: float, use: list[float], asked: bool) -> float:
    """Days until D reaches RAW at the mean use of the last three days; 0 is now; blank without three days."""
    if not asked or len(use) < 3:
        return float("nan")
    if d >= raw:
        return 0.0
    return (raw - d) / max((use[-1] + use[-2] + use[-3]) / 3.0, 0.01)  # floor: no use, no division by nothing


def for_plants(g: Ground, dr: float, de: float, few: float) -> float:
    """Root zone depletion D without what the top lacks below wilting point."""
    return dr - few * max(de - g.available_mm_m * g.ze, 0.0)


def moved_roots(g: Ground, store: Store, zr: float) -> Store:
    """Roots deepen, the new slice bringing what it lacks (p. 173), or withdraw at the season's end."""
    s = replace(store)
    if zr > s.zr:
        share = s.ds * (zr - s.zr) / (g.profile_depth - s.zr)
        s.dr += share
        s.ds -= share
    elif zr < s.zr:
        # capped by the depletion it had, or water would rise
        kept = min(g.available_mm_m * zr, max(s.dr * zr / s.zr, s.few * s.de), s.dr)
        s.ds += s.dr - kept
        s.dr = kept
    s.zr = zr
    return s


def drain(store: Store, water: dict[str, float], loss: float) -> None:
    """Let a surface method's loss pass below the roots (changes both)."""
    water["irrigation"] += loss
    water["percolation"] += loss
    left = store.ds - loss
    water["drainage"] += max(-left, 0.0)
    store.ds = max(left, 0.0)


def one_day(g: Ground, store: Store, w: Weather) -> tuple[Store, dict[str, float]]:
    """One day of FAO-56's dual crop coefficient balance."""
    water = {"irrigation": w.irrigation}
    s = moved_roots(g, store, w.zr)

    liquid, melt, s.snow = snow_balance(s.snow, w.precipitation, w.t_mean, w.melt_factor)
    water["melt"] = melt

    ro = runoff(liquid, curve_number_today(g, s.de))
    pn = liquid - ro
    water["runoff"] = ro

    if pn >= 3.0:
        fw_new = 1.0
    elif w.irrigation > 0.0:
        fw_new = g.fw_method
    else:
        fw_new = s.fw
    if fw_new > s.fw:
        s.de = (s.fw * s.de + (fw_new - s.fw) * s.de_dry) / fw_new
    elif fw_new < s.fw:  # part of what was wet joins the dry part
        s.de_dry = ((1.0 - s.fw) * s.de_dry + (s.fw - fw_new) * s.de) / (1.0 - fw_new)
    s.fw = fw_new

    exposed = exposed_and_wetted(w.cover, s.fw, g.drip)
    few = exposed * (1.0 - 0.5 * g.residue)

    wets = pn if liquid >= 0.2 * w.eto else 0.0  # p. 153
    de_start = max(s.de - wets - w.irrigation / s.fw, 0.0)
    s.de_dry = max(s.de_dry - wets, 0.0)
    limit = tew(g)
    kr = 1.0 if de_start <= g.rew else max((limit - de_start) / (limit - g.rew), 0.0)

    ke = min(kr * (w.kc_max - w.kcb) * (1.0 - 0.5 * g.residue), few * w.kc_max)
    e = min(ke * w.eto, few * max(limit - de_start, 0.0))

    taw = g.available_mm_m * s.zr
    dr_start = s.dr - pn - w.irrigation - w.rise
    percolation = max(-dr_start, 0.0)
    dr_start = max(dr_start, 0.0)

    dr_limit = taw + 500.0 * g.theta_wp * g.ze
    e = max(min(e, dr_limit - dr_start), 0.0)
    s.de = de_start + e / few

    etc = (w.kcb + ke) * w.eto
    p = min(max(g.p_table + 0.04 * (5.0 - etc), 0.1), 0.8)
    raw = p * taw
    d = for_plants(g, dr_start, de_start, few)
    ks = 1.0 if d <= raw or w.kcb <= 0.0 else min(max((taw - d) / (taw - raw), 0.0), 1.0)
    t = min(ks * w.kcb * w.eto, max(0.0, dr_limit - dr_start - e))

    if g.uptake:  # Tew of eq. 77, share of Allen et al. (2005); down to wilting point
        wet = max(1.0 - s.de / limit, 0.0)
        share = wet / max(1.0 - (dr_start + e) / taw, 1e-9) * (g.ze / s.zr) ** 0.6
        s.de += min(min(share, 1.0) * t, max(g.available_mm_m * g.ze - s.de, 0.0))

    s.dr = dr_start + e + t
    s.ds -= percolation
    drainage = max(-s.ds, 0.0)
    s.ds = max(s.ds, 0.0)
    s.few = few
    water.update(
        e=e, t=t, ke=ke, ks=ks, few=few, percolation=percolation, drainage=drainage, taw=taw, raw=raw, p=p, etc=etc
    )
    return s, water
