"""Which ground chain can serve which radio: frequency inside the band, polarisation that fits."""

from __future__ import annotations

from passplan.inputs.fleet import CommandRadio, DownlinkRadio
from passplan.inputs.ground import Receiver, Transmitter

_CIRCULAR = ("RHCP", "LHCP")


def polarisation_loss_db(sent: str, taken: str) -> float | None:
    """Loss between two ideal polarisations in dB; None where they are orthogonal and nothing arrives.

    Equal: 0 dB. Linear into circular or the reverse: half the power, 3.01 dB (textbook).
    """
    if sent == taken:
        return 0.0
    return 3.0103 if (sent in _CIRCULAR) != (taken in _CIRCULAR) else None


def matching_loss_db(radio: DownlinkRadio | CommandRadio, chain: Receiver | Transmitter) -> float | None:
    """Polarisation loss in dB with the best of the chain's polarisations; None where the chain cannot serve.

    A downlink radio needs a receiver and a command radio a transmitter.
    """
    if isinstance(radio, DownlinkRadio) != isinstance(chain, Receiver):
        return None
    if not chain.low_mhz <= radio.frequency_mhz <= chain.high_mhz:
        return None
    losses = [polarisation_loss_db(radio.polarisation, taken) for taken in chain.polarisations]
    return min((loss for loss in losses if loss is not None), default=None)
