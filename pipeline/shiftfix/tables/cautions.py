"""Cautions that go with every result: by declared class of emitter and by band; they cannot be switched off."""

from __future__ import annotations

import math
from collections.abc import Iterable

_GENERAL = (
    "A fix is a statement under a model. Another listed solution may be the true one: do not send people, vessels or "
    "aircraft, and do not accuse anyone, on one solution. Read the level, the alternatives and the error budget first.",
    "Receiving, recording or publishing the position of a transmitter may need authority where you are. The law of the "
    "country and the secrecy of correspondence (ITU Radio Regulations, Art. 17) come first. Only carrier frequencies are "
    "used here; no content is demodulated.",
    "A transmitter may be carried by a person. Do not locate individuals without consent or lawful authority; keep and "
    "publish no more than the purpose needs.",
    "Locating emitters is controlled as dual-use technology in some jurisdictions: check before you pass results on.",
)

# The first sentence of each must be able to stand alone: a terminal shows the most urgent caution in full and of the
# others the first sentence.
_BY_CLASS = {
    "distress": "DISTRESS: training and research only, not a rescue instrument. If a real distress signal is suspected, "
    "stop and call the national rescue coordination centre, the coastguard or the aviation rescue service at once; never "
    "delay, never hold data back, never transmit. The authorised satellite distress service decides.",
    "aviation": "AVIATION: report interference to the national regulator and the air-navigation service at once. Do not "
    "approach the emitter, do not transmit, no self-help.",
    "maritime": "MARITIME: report interference on marine channels to the national regulator and the coastguard. If a "
    "distress channel (156.8 MHz, 2182 kHz) is affected or distress is possible, call the coastguard first. Do not "
    "approach the emitter.",
    "navigation": "NAVIGATION SATELLITE BANDS: report interference to the national regulator. Aircraft and ships may "
    "depend on the signal now. Do not transmit, do not approach the emitter.",
    "personal": "PERSONAL DEVICE: this emitter may mark a person. Use only with consent or lawful authority; redact "
    "positions before they leave the service.",
    "wildlife": "WILDLIFE: coarsen positions before they are published, so that they do not lead poachers to the animals.",
    "military": "MILITARY OR SECURITY: do not publish. Ask the competent authority before any further step.",
    "space": "SPACE: not for collision avoidance or manoeuvre decisions. Operators and the authorised space-surveillance "
    "services decide.",
}

EMITTER_CLASSES = (*_BY_CLASS, "broadcast", "amateur", "unknown")
"""Classes that a pipeline file may declare, most urgent first."""

# Bands [MHz] whose caution is shown whether the class is declared or not. ITU Radio Regulations, Art. 5, App. 15 and 18
# (limits from memory); widened by what an emitter may be off its channel.
_BANDS_MHZ = {
    "distress": (
        (2.1790, 2.1850),  # 2182 kHz
        (2.1865, 2.1885),  # 2187.5 kHz, digital selective calling
        (121.475, 121.525),
        (156.5125, 156.5375),  # channel 70
        (156.775, 156.825),  # channel 16
        (242.95, 243.05),
        (405.99, 406.11),
    ),
    "aviation": ((108.0, 137.0), (328.6, 335.4), (960.0, 1215.0)),
    "maritime": ((156.0, 162.05),),
    "navigation": ((1164.0, 1300.0), (1559.0, 1610.0)),
}


def classes_of_frequency(frequency_hz: float | None) -> tuple[str, ...]:
    """Return the classes whose caution a frequency calls for, most urgent first; none for None or NaN.

    Parameters
    ----------
    frequency_hz : float or None
        Received frequency at sky level [Hz]; Doppler shifts are small beside the widths of the bands.
    """
    if frequency_hz is None or not math.isfinite(frequency_hz):
        return ()
    mhz = frequency_hz * 1e-6
    return tuple(name for name, bands in _BANDS_MHZ.items() if any(low <= mhz <= high for low, high in bands))


def cautions_for(emitter_classes: Iterable[str], received_frequency_hz: float | None = None) -> tuple[str, ...]:
    """Return the cautions of the declared classes and of the band, most urgent first, then the general ones.

    Parameters
    ----------
    emitter_classes : iterable of str
    received_frequency_hz : float, optional
        A band of safety services adds its caution when the class was not declared, and says why.

    Raises
    ------
    ValueError
        For a class that is not in `EMITTER_CLASSES`.
    """
    declared = tuple(emitter_classes)
    unknown = [c for c in declared if c not in EMITTER_CLASSES]
    if unknown:
        raise ValueError(f"unknown emitter class {unknown[0]!r}; allowed: {', '.join(EMITTER_CLASSES)}")
    by_band = classes_of_frequency(received_frequency_hz)
    specific = []
    for name, text in _BY_CLASS.items():
        if name in declared:
            specific.append(text)
        elif name in by_band:
            specific.append(f"{text} (Shown because {received_frequency_hz * 1e-6:.3f} MHz lies in a band of this service.)")
    return (*specific, *_GENERAL)
