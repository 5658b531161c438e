"""The two ways to state what a transmitter radiates, told apart."""

from __future__ import annotations


def check_transmit(eirp_dbw: float | None, power_w: float | None, gain_dbi: float | None, loss_db: float) -> None:
    """Raise ValueError unless there is either an EIRP, or a power and a gain (losses go with the latter)."""
    built = power_w is not None and gain_dbi is not None
    partly = power_w is not None or gain_dbi is not None
    if eirp_dbw is not None and (partly or loss_db):
        raise ValueError("give either eirp_dbw, or transmit_power_w, antenna_gain_dbi and transmit_loss_db, not both")
    if eirp_dbw is None and not built:
        raise ValueError("give eirp_dbw, or both transmit_power_w and antenna_gain_dbi")
