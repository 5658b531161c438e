"""One link budget line by line, to be checked with a pocket calculator, and one along a pass."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.pointing import LookAngles, look_angles
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.ground import Transmitter
from passplan.inputs.run import Run
from passplan.link.atmosphere import LOWEST_STATED_ELEVATION_DEG
from passplan.link.budget import BOLTZMANN_DBW_PER_K_HZ, Floats, ebn0_from_esn0_db
from passplan.link.chains import Chain, Rung, chains_between
from passplan.link.interference import aggregate_db
from passplan.link.neighbours import beam_known, neighbours, sharing, with_interference_db
from passplan.link.noise import dish_of, figure_note
from passplan.link.notices import STATISTICS, chain_notices
from passplan.link.terms import PathTerms, flux_density, path_terms


@dataclass(frozen=True)
class BudgetLine:
    """One term of a budget: which link it belongs to, what it is, its value, unit and source."""

    link: str
    term: str
    value: float | str
    unit: str
    source: str


def budget_lines(run: Run, spacecraft: str, antenna: str, at_utc: np.datetime64) -> list[BudgetLine]:
    """Every downlink and command link between a spacecraft and an antenna at an instant, term by term.

    The terms of a link add up as printed (losses are negative; an indented term says what the next one is
    made of, and is not added). Empty where no radio matches a chain of the antenna. :class:`KeyError` where
    the run has no such spacecraft, orbit or antenna.
    """
    times_utc = np.array([at_utc], "datetime64[ms]")
    look = _look(run, spacecraft, antenna, times_utc)
    lines: list[BudgetLine] = []
    for chain in chains_between(run, spacecraft, antenna):
        link = f"{chain.direction} {chain.radio} via {chain.partner}"
        path = path_terms(run, antenna, chain, look, times_utc)
        terms = (
            *_geometry(run, look), *_radiated(run, chain), *_signal(run, chain, path), *_demodulation(run, chain, path),
            *_interference(run, spacecraft, antenna, chain, path, times_utc), *_ground_flux(run, chain, path),
            *_notices(run, chain, path),
        )
        lines.extend(BudgetLine(link, *term) for term in terms)
    return lines


def link_along(run: Run, spacecraft: str, antenna: str, times_utc: NDArray[np.datetime64]) -> pd.DataFrame:
    """Quality, margin and rate of every link at each time, one row per link and time.

    Columns: ``utc, direction, radio, partner, azimuth_deg, elevation_deg, range_km, quality_db`` (Es/N0, for
    commands Eb/N0, after implementation loss), ``modcod`` (the fastest that holds the policy's margin, or
    empty), ``margin_db`` (of that modcod, else of the most robust one), ``rate_mbps``, and the moving losses
    one by one [dB], the system noise [K] and the angle to the Sun [deg] where they are known and counted, and
    C/I [dB] if all others of the fleet that are up on the spectrum sent (NaN where there are none).
    """
    look = _look(run, spacecraft, antenna, times_utc)
    tables = [
        _along(run, spacecraft, antenna, chain, look, times_utc) for chain in chains_between(run, spacecraft, antenna)
    ]
    return pd.concat(tables, ignore_index=True) if tables else pd.DataFrame(columns=list(_ALONG_COLUMNS))


_ALONG_COLUMNS = (
    "utc", "direction", "radio", "partner", "azimuth_deg", "elevation_deg", "range_km", "quality_db", "modcod",
    "margin_db", "rate_mbps", "free_space_db", "gas_db", "rain_db", "cloud_db", "scintillation_db", "weather_db",
    "wet_radome_db", "pattern_db", "g_over_t_drop_db", "sun_db", "system_noise_k", "sun_separation_deg", "c_over_i_db",
)
_NEIGHBOURS_SHOWN = 5
_Term = tuple[str, float | str, str, str]


def _look(run: Run, spacecraft: str, antenna: str, times_utc: NDArray[np.datetime64]) -> LookAngles:
    site = run.sites[run.antennas[antenna].site]
    return look_angles(run.orbits[spacecraft], site, times_utc, refraction=run.policy.refraction != "off")


def _pick(rungs: tuple[Rung, ...], quality_db: float, margin_db: float) -> tuple[Rung, bool]:
    """The fastest rung that holds the margin; where none does, the most robust one and False."""
    for rung in rungs:
        if quality_db - rung.required_db >= margin_db:
            return rung, True
    return rungs[-1], False


def _geometry(run: Run, look: LookAngles) -> Iterator[_Term]:
    elevation = float(look.elevation_deg[0])
    seen = "geometric, no refraction" if run.policy.refraction == "off" else "apparent, refraction by ITU-R P.834"
    note = seen if elevation >= 0.0 else "below the horizon: there is no link"
    yield "azimuth", float(look.azimuth_deg[0]), "deg", "from true north"
    yield "elevation", elevation, "deg", note
    yield "slant range", float(look.range_km[0]), "km", "orbit and site"


def _radiated(run: Run, chain: Chain) -> Iterator[_Term]:
    """What the EIRP is made of, where it was built from power and gain."""
    item = run.radios[chain.radio] if chain.direction == "downlink" else run.transmitters[chain.partner]
    if isinstance(item, DownlinkRadio | Transmitter):
        source = f"{'radio' if isinstance(item, DownlinkRadio) else 'transmitter'} {item.name}"
        if item.transmit_power_w is not None and item.antenna_gain_dbi is not None:
            power_dbw = 10.0 * float(np.log10(item.transmit_power_w))
            yield "  transmit power", power_dbw, "dBW", f"{source}: {item.transmit_power_w:g} W"
            yield "  antenna gain", item.antenna_gain_dbi, "dBi", source
            yield "  loss before the antenna", 0.0 - item.transmit_loss_db, "dB", source
        if item.back_off_db:
            yield "  back-off", -item.back_off_db, "dB", f"{source}; counted in the EIRP below"


def _signal(run: Run, chain: Chain, path: PathTerms) -> Iterator[_Term]:
    """From EIRP to energy per symbol (or bit) over noise density; 0.0 - x, so that no loss prints as -0."""
    aboard = f"radio {chain.radio}"
    ground = f"{'receiver' if chain.direction == 'downlink' else 'transmitter'} {chain.partner}"
    sender, listener = (aboard, ground) if chain.direction == "downlink" else (ground, aboard)
    rate_db = 10.0 * float(np.log10(chain.rate_hz))
    ratio_db = float(path.quality_db[0]) + chain.implementation_loss_db
    yield "frequency", chain.frequency_mhz, "MHz", aboard
    yield "EIRP", chain.eirp_dbw, "dBW", sender
    yield "pointing loss aboard", 0.0 - chain.pointing_loss_aboard_db, "dB", aboard
    if path.off_nadir_deg is not None:
        source = f"{aboard}: fixed, {path.off_nadir_deg[0]:.1f} deg off nadir (from slant range)"
        yield "pattern loss aboard", 0.0 - float(path.pattern_db[0]), "dB", source
    yield from _air(run, chain, path)
    yield "polarisation loss", 0.0 - chain.polarisation_loss_db, "dB", f"{chain.polarisation} aboard, {ground}"
    yield "pointing loss on the ground", 0.0 - chain.pointing_loss_ground_db, "dB", ground
    yield "G/T", chain.g_over_t_db_per_k, "dB/K", listener
    if chain.receiver is not None:
        yield from _noise(run, chain, path)
    yield "Boltzmann's constant", -BOLTZMANN_DBW_PER_K_HZ, "dBHzK/W", "SI, taken off"
    yield "C/N0", ratio_db + rate_db, "dBHz", "sum of EIRP and the terms below it"
    yield "symbol rate" if chain.direction == "downlink" else "bit rate", -rate_db, "dBHz", aboard
    yield "Es/N0" if chain.direction == "downlink" else "Eb/N0", ratio_db, "dB", "C/N0 less the rate"


def _air(run: Run, chain: Chain, path: PathTerms) -> Iterator[_Term]:
    low = float(path.look.elevation_deg[0]) < LOWEST_STATED_ELEVATION_DEG
    percent, rate = path.sky.percent, path.sky.site.rain_rate_mm_per_h
    vapour = "" if percent is None else f", vapour of P.836 at {max(percent, 1.0):g} %"
    gas_source = f"ITU-R P.676-12, Annex 2{vapour}"
    yield "free-space loss", -float(path.free_space_db[0]), "dB", "ITU-R P.525"
    low_note = ", carried on below its stated 5 deg" if low else ""
    yield "gas attenuation", -float(path.air.gas_db[0]), "dB", gas_source + low_note
    if path.sky.wet:
        rain = f"ITU-R P.618-13 with P.837, P.838, P.839, {percent:g} %" if percent is not None else "no statistics"
        if rate is not None:
            rain = f"ITU-R P.618-13 with {rate:g} mm/h, stated for the day"
        yield "  rain", 0.0 - float(path.air.rain_db[0]), "dB", rain
        if percent is not None:
            yield "  cloud", 0.0 - float(path.air.cloud_db[0]), "dB", f"ITU-R P.840-8 at {max(percent, 1.0):g} %"
            dish_m = path.sky.diameter_m
            note = f", dish of {dish_m:.1f} m" if dish_m else ", no dish averaging"
            yield "  scintillation", 0.0 - float(path.air.scintillation_db[0]), "dB", f"ITU-R P.618-13{note}"
        combined = "ITU-R P.618-13, section 2.5: sqrt((rain + cloud)^2 + scintillation^2)"
        yield "weather", 0.0 - float(path.weather_db[0]), "dB", combined
        if chain.wet_radome_loss_db:
            yield "wet radome", -path.radome_db, "dB", "allowance of the antenna"
    if chain.ionospheric_loss_db:
        yield "ionosphere", -chain.ionospheric_loss_db, "dB", "allowance of the policy below 1 GHz"


def _noise(run: Run, chain: Chain, path: PathTerms) -> Iterator[_Term]:
    receiver = chain.receiver
    if receiver is None:
        return
    if path.noise_k is not None:
        yield "  system noise", float(path.noise_k[0]), "K", figure_note(receiver)
    drop_db = float(path.figure_drop_db[0])
    if path.noise_k is None or drop_db or receiver.g_over_t_curve:
        rise = "10 log10 of the noise above that of G/T, P.618 section 3"
        yield "G/T at this elevation", 0.0 - drop_db, "dB", figure_note(receiver) if path.noise_k is None else rise
    if path.sun_separation_deg is not None:
        width = dish_of(receiver, chain.frequency_mhz)[1]
        separation = float(path.sun_separation_deg[0])
        where = f"{separation:.1f} deg off" if separation < 180.0 else "below the horizon"
        source = f"{where}, beam {width:.2f} deg; disc of ITU-R S.1525, from memory"
        yield "Sun", 0.0 - float(path.sun_db[0]), "dB", source


def _interference(
    run: Run, spacecraft: str, antenna: str, chain: Chain, path: PathTerms, times_utc: NDArray[np.datetime64]
) -> Iterator[_Term]:
    """What the rest of the fleet would leave, if all that are up on this spectrum sent at this instant."""
    if chain.direction != "downlink" or not sharing(run, chain, spacecraft):
        return
    if not beam_known(chain):
        yield "C/I", "unknown", "", f"receiver {chain.partner} states neither gain, diameter nor beamwidth"
        return
    found = neighbours(run, antenna, spacecraft, chain, path.look, times_utc)
    if not found:
        yield "C/I", "none", "", "nobody else of the fleet on this spectrum is up"
        return
    for entry in found[:_NEIGHBOURS_SHOWN]:
        where = f"{float(entry.apart_deg[0]):.2f} deg from it, at {float(entry.range_km[0]):,.0f} km; if it sends"
        yield f"  C/I, {entry.name}", float(entry.ratio_db[0]), "dB", where
    rest = found[_NEIGHBOURS_SHOWN:]
    if rest:
        together = float(aggregate_db([entry.ratio_db for entry in rest])[0])
        yield f"  C/I, {len(rest)} more", together, "dB", "together; if all of them send"
    total = aggregate_db([entry.ratio_db for entry in found])
    asked = run.policy.required_c_over_i_db
    limit = "the policy asks nothing of it" if asked is None else f"the policy asks for {asked:g} dB"
    yield "C/I, if all send", float(total[0]), "dB", f"powers added; main beam and ITU-R S.465-6; {limit}"
    quality = with_interference_db(path.quality_db + chain.implementation_loss_db, total)
    yield "Es/(N0+I0), if all send", float(quality[0]), "dB", "I0 counted as noise, level across the band"
    rung, _ = _pick(chain.rungs, float(path.quality_db[0]), run.policy.required_margin_db)
    margin_db = float(quality[0]) - chain.implementation_loss_db - rung.required_db
    yield "margin, if all send", margin_db, "dB", f"of {rung.name}, after the same losses"


def _ground_flux(run: Run, chain: Chain, path: PathTerms) -> Iterator[_Term]:
    """Power flux density at the ground: a flag, not a verdict."""
    found = flux_density(run, chain, path)
    if found is not None:
        over = float(found.excess_db[0])
        verdict = f"OVER the limit by {over:.1f} dB: look into it" if over > 0.0 else f"{-over:.1f} dB below the limit"
        source = f"{verdict}; EIRP / (4 pi d^2) over the symbol rate"
        yield "flux density at ground", float(found.density_dbw_per_m2[0]), found.unit, source
        yield "  its limit", float(found.limit_dbw_per_m2[0]), found.unit, found.source


def _notices(run: Run, chain: Chain, path: PathTerms) -> Iterator[_Term]:
    for notice in chain_notices(run, chain, path.sky, float(path.look.elevation_deg[0])):
        yield "notice", "", "", notice
    if path.sky.percent is not None:
        yield "notice", "", "", STATISTICS


def _demodulation(run: Run, chain: Chain, path: PathTerms) -> Iterator[_Term]:
    """From energy over noise density to margin and rate."""
    radio, quality_db = run.radios[chain.radio], float(path.quality_db[0])
    rung, holds = _pick(chain.rungs, quality_db, run.policy.required_margin_db)
    note = "fastest that holds the margin" if holds else "most robust; it does not hold the margin"
    yield "implementation loss", 0.0 - chain.implementation_loss_db, "dB", f"radio {chain.radio}"
    if isinstance(radio, DownlinkRadio):
        yield "modcod", rung.name, "", note
        pilots = ", pilots counted" if radio.pilots else ""
        yield "required Es/N0", -rung.required_db, "dB", run.modcod_tables[radio.modcod_table].source + pilots
    else:
        yield "required Eb/N0", -rung.required_db, "dB", f"radio {chain.radio}"
    asked = f"what is left; the policy asks for {run.policy.required_margin_db:g} dB"
    yield "margin", quality_db - rung.required_db, "dB", asked
    yield "net rate", rung.rate_mbps if holds else 0.0, "Mbit/s", note
    if isinstance(radio, DownlinkRadio):
        ratio_db = quality_db + chain.implementation_loss_db
        ebn0_db = float(ebn0_from_esn0_db(ratio_db, rung.rate_mbps / radio.symbol_rate_msps))
        yield "Eb/N0", ebn0_db, "dB", "Es/N0 - 10 log10(efficiency), for comparison"


def _aggregate(
    run: Run, spacecraft: str, antenna: str, chain: Chain, look: LookAngles, times_utc: NDArray[np.datetime64]
) -> Floats:
    """C/I [dB] at each time if all that are up sent; NaN where nobody is, or where it cannot be known."""
    found = neighbours(run, antenna, spacecraft, chain, look, times_utc) if chain.direction == "downlink" else []
    total = aggregate_db([entry.ratio_db for entry in found]) if found else np.full(len(times_utc), np.inf)
    return np.asarray(np.where(np.isfinite(total), total, np.nan))


def _along(
    run: Run, spacecraft: str, antenna: str, chain: Chain, look: LookAngles, times_utc: NDArray[np.datetime64]
) -> pd.DataFrame:
    path = path_terms(run, antenna, chain, look, times_utc)
    quality_db, unknown = path.quality_db, np.full(len(times_utc), np.nan)
    picks = [_pick(chain.rungs, float(value), run.policy.required_margin_db) for value in quality_db]
    columns = (
        times_utc, chain.direction, chain.radio, chain.partner, look.azimuth_deg, look.elevation_deg, look.range_km,
        quality_db,
        [rung.name if holds else "" for rung, holds in picks],
        [float(value) - rung.required_db for value, (rung, _) in zip(quality_db, picks, strict=True)],
        [rung.rate_mbps if holds else 0.0 for rung, holds in picks],
        path.free_space_db, path.air.gas_db, path.air.rain_db, path.air.cloud_db, path.air.scintillation_db,
        path.weather_db, path.radome_db, path.pattern_db, path.figure_drop_db, path.sun_db,
        unknown if path.noise_k is None else path.noise_k,
        unknown if path.sun_separation_deg is None else path.sun_separation_deg,
        _aggregate(run, spacecraft, antenna, chain, look, times_utc),
    )
    return pd.DataFrame(dict(zip(_ALONG_COLUMNS, columns, strict=True)))
