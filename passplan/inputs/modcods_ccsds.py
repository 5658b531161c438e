"""Coding options of CCSDS telemetry over BPSK and QPSK.

The codes and block lengths are those of CCSDS 131.0-B (convolutional, Reed-Solomon, turbo, LDPC). The
required Eb/N0 are the trade's round figures for soft decisions in additive white Gaussian noise, as the
curves of CCSDS 130.1-G show them, **from memory: verify before relying on them**. Efficiencies count the code
and the attached synchronisation marker, and leave the transfer frame's own header to the user.
"""

from __future__ import annotations

import math

CCSDS_SOURCE = "CCSDS 131.0-B codes; required Eb/N0 after CCSDS 130.1-G, from memory: verify"

# (code, information bits, channel bits with the marker, code rate, required Eb/N0 in dB)
_CODES: tuple[tuple[str, int, float, float, float], ...] = (
    ("turbo 1/6", 8_920, 6 * (8_920 + 4) + 192, 1 / 6, -0.1),
    ("turbo 1/4", 8_920, 4 * (8_920 + 4) + 128, 1 / 4, 0.1),
    ("turbo 1/3", 8_920, 3 * (8_920 + 4) + 96, 1 / 3, 0.4),
    ("turbo 1/2", 8_920, 2 * (8_920 + 4) + 64, 1 / 2, 1.0),
    ("LDPC 1/2", 16_384, 32_768 + 64, 1 / 2, 1.1),
    ("LDPC 2/3", 16_384, 24_576 + 64, 2 / 3, 1.9),
    ("LDPC 4/5", 16_384, 20_480 + 64, 4 / 5, 2.8),
    ("LDPC 7/8", 7_136, 8_160 + 32, 7_136 / 8_160, 4.0),
    ("RS+conv 1/2", 8_920, 2 * (10_200 + 32), 223 / 255 / 2, 2.6),
    ("conv 1/2", 8_920, 2 * (8_920 + 32), 1 / 2, 4.2),
    ("conv 3/4", 8_920, (8_920 + 32) * 4 / 3, 3 / 4, 5.2),
    ("conv 7/8", 8_920, (8_920 + 32) * 8 / 7, 7 / 8, 6.5),
    ("RS(255,223)", 8_920, 10_200 + 32, 223 / 255, 6.4),
)


def ccsds_rows() -> tuple[tuple[str, float, float], ...]:
    """(modcod, net bit per symbol, required Es/N0 in dB): Es/N0 = Eb/N0 + 10 log10(bits per symbol x code rate)."""
    return tuple(
        (f"{modulation} {code}", bits * information / channel, ebn0_db + 10.0 * math.log10(bits * rate))
        for modulation, bits in (("BPSK", 1), ("QPSK", 2))
        for code, information, channel, rate, ebn0_db in _CODES
    )
