"""The 28 modcods of DVB-S2.

Source: ETSI EN 302 307-1 V1.4.1, Table 13: normal FECFRAME (64 800 bit), no pilots, ideal Es/N0 at
quasi-error-free operation (packet error rate 1e-7) in additive white Gaussian noise. The efficiencies
already count the coding and the headers of base-band and physical-layer frames.
"""

from __future__ import annotations

# Slots of 90 symbols in a normal frame, by modulation; pilots are 36 symbols after every 16 slots but the last.
_SLOTS = {"QPSK": 360, "8PSK": 240, "16APSK": 180, "32APSK": 144}


def pilot_factor(modcod: str) -> float:
    """What is left of the efficiency with pilots on. Source: ETSI EN 302 307-1, clause 5.5.3 (from memory)."""
    slots = _SLOTS[modcod.split(" ", maxsplit=1)[0]]
    symbols = 90 * (slots + 1)
    return symbols / (symbols + 36 * ((slots - 1) // 16))


DVB_S2_SOURCE = "ETSI EN 302 307-1 V1.4.1, Table 13 (ideal Es/N0, packet error rate 1e-7, no pilots)"

# (modcod, net bit per symbol, required Es/N0 in dB)
DVB_S2_ROWS: tuple[tuple[str, float, float], ...] = (
    ("QPSK 1/4", 0.490243, -2.35),
    ("QPSK 1/3", 0.656448, -1.24),
    ("QPSK 2/5", 0.789412, -0.30),
    ("QPSK 1/2", 0.988858, 1.00),
    ("QPSK 3/5", 1.188304, 2.23),
    ("QPSK 2/3", 1.322253, 3.10),
    ("QPSK 3/4", 1.487473, 4.03),
    ("QPSK 4/5", 1.587196, 4.68),
    ("QPSK 5/6", 1.654663, 5.18),
    ("QPSK 8/9", 1.766451, 6.20),
    ("QPSK 9/10", 1.788612, 6.42),
    ("8PSK 3/5", 1.779991, 5.50),
    ("8PSK 2/3", 1.980636, 6.62),
    ("8PSK 3/4", 2.228124, 7.91),
    ("8PSK 5/6", 2.478562, 9.35),
    ("8PSK 8/9", 2.646012, 10.69),
    ("8PSK 9/10", 2.679207, 10.98),
    ("16APSK 2/3", 2.637201, 8.97),
    ("16APSK 3/4", 2.966728, 10.21),
    ("16APSK 4/5", 3.165623, 11.03),
    ("16APSK 5/6", 3.300184, 11.61),
    ("16APSK 8/9", 3.523143, 12.89),
    ("16APSK 9/10", 3.567342, 13.13),
    ("32APSK 3/4", 3.703295, 12.73),
    ("32APSK 4/5", 3.951571, 13.64),
    ("32APSK 5/6", 4.119540, 14.28),
    ("32APSK 8/9", 4.397854, 15.69),
    ("32APSK 9/10", 4.453027, 16.05),
)
