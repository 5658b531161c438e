"""Every moving term of one chain, one by one and straight from the models: what a budget prints.

Planning looks the same terms up in tables (``slant``, ``profiles``); a test holds the two together.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.pointing import LookAngles
from passplan.geometry.sun import pointing_vectors
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.run import Run
from passplan.link.atmosphere import Attenuations, SkyPath, skies
from passplan.link.budget import Floats, free_space_loss_db, off_nadir_deg
from passplan.link.chains import Chain
from passplan.link.ground_flux import GroundFlux, ground_flux
from passplan.link.noise import dish_of, figure_drop_db, system_noise_at_k
from passplan.link.profiles import pattern_loss_db
from passplan.link.slant import sky_path
from passplan.link.sun_noise import sun_loss_db, sun_seen


@dataclass(frozen=True)
class PathTerms:
    """The moving terms of one chain at times of shape (n,); losses [dB] are positive.

    ``figure_drop_db`` is by how much G/T is below the chain's reference, the Sun apart (``sun_db``).
    ``noise_k``, ``sun_separation_deg`` and ``off_nadir_deg`` are None where they are not known or not counted.
    """

    look: LookAngles
    sky: SkyPath
    free_space_db: Floats
    air: Attenuations
    radome_db: float
    pattern_db: Floats
    off_nadir_deg: Floats | None
    figure_drop_db: Floats
    noise_k: Floats | None
    sun_separation_deg: Floats | None
    sun_db: Floats
    quality_db: Floats

    @property
    def weather_db(self) -> Floats:
        """Rain, cloud and scintillation combined: what stands beside gas in P.618, section 2.5."""
        return np.asarray(self.air.total_db - self.air.gas_db)


def path_terms(
    run: Run, antenna: str, chain: Chain, look: LookAngles, times_utc: NDArray[np.datetime64]
) -> PathTerms:
    """The terms of a chain along the pointing ``look`` at ``times_utc``."""
    path = sky_path(run, antenna, chain)
    sky, elevation_deg = skies([path])[path], look.elevation_deg
    free_space_db, air = free_space_loss_db(chain.frequency_mhz, look.range_km), sky.at(elevation_deg)
    radome_db = chain.wet_radome_loss_db if path.wet else 0.0
    nothing = np.zeros_like(elevation_deg)
    pattern_db, angle = nothing, None
    if chain.pattern:
        angle = off_nadir_deg(elevation_deg, look.range_km, path.site.latitude_deg, path.site.height_m)
        pattern_db = pattern_loss_db(chain.pattern, angle)
    drop_db, noise_k, separation, sun_db = nothing, None, None, nothing
    if chain.receiver is not None:
        noise_k = system_noise_at_k(chain.receiver, sky, elevation_deg, radome_db, air)
        drop_db = figure_drop_db(chain.receiver, elevation_deg, noise_k)
        width_deg = dish_of(chain.receiver, chain.frequency_mhz)[1]
        if run.policy.sun_noise and noise_k is not None and width_deg is not None:
            separation = _separation_deg(run, path, look, times_utc)
            feeder_db = chain.receiver.feeder_loss_db
            sun_db = sun_loss_db(chain.frequency_mhz, width_deg, separation, noise_k, feeder_db)
    loss_db = free_space_db + air.total_db + radome_db + pattern_db + drop_db + sun_db
    return PathTerms(
        look, path, free_space_db, air, radome_db, pattern_db, angle, drop_db, noise_k, separation, sun_db,
        np.asarray(chain.merit_db - loss_db),
    )


def flux_density(run: Run, chain: Chain, terms: PathTerms) -> GroundFlux | None:
    """Power flux density at the station, with EIRP as it is towards it; None for commands, and without a limit."""
    radio = run.radios[chain.radio]
    if not isinstance(radio, DownlinkRadio):
        return None
    return ground_flux(run, radio, chain.eirp_dbw - terms.pattern_db, terms.look.range_km, terms.look.elevation_deg)


def _separation_deg(run: Run, path: SkyPath, look: LookAngles, times_utc: NDArray[np.datetime64]) -> Floats:
    """Angle between the pointing and the Sun at each instant [deg]; 180 where the Sun is below the horizon."""
    sun = sun_seen(path.site, times_utc, refraction=run.policy.refraction != "off")
    away = np.linalg.norm(pointing_vectors(look.azimuth_deg, look.elevation_deg) - sun, axis=1)
    angle = np.degrees(2.0 * np.arcsin(np.clip(away / 2.0, 0.0, 1.0)))
    return np.asarray(np.where(sun[:, 2] > 0.0, angle, 180.0))
