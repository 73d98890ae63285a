"""Cautions that go with every result, by declared class of emitter; they cannot be switched off."""

from __future__ import annotations

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

_BY_CLASS = {
    "distress": (
        "DISTRESS: training and research only, not a rescue instrument. If a real distress signal is suspected, stop and "
        "call the national rescue coordination centre, the coastguard or the aviation rescue service at once; never delay, "
        "never hold data back, never transmit. The authorised satellite distress service decides.",
    ),
    "aviation": (
        "AVIATION: report interference to the national regulator and the air-navigation service at once. Do not approach "
        "the emitter, do not transmit, no self-help.",
    ),
    "maritime": (
        "MARITIME: report interference on marine channels to the national regulator and the coastguard. If a distress "
        "channel (156.8 MHz, 2182 kHz) is affected or distress is possible, call the coastguard first. Do not approach the emitter.",
    ),
    "navigation": (
        "NAVIGATION SATELLITE BANDS: report interference to the national regulator; aircraft and ships may depend on the "
        "signal now. Do not transmit, do not approach the emitter.",
    ),
    "personal": (
        "PERSONAL DEVICE: this emitter may mark a person. Use only with consent or lawful authority; redact positions before "
        "they leave the service.",
    ),
    "wildlife": (
        "WILDLIFE: coarsen positions before they are published, so that they do not lead poachers to the animals.",
    ),
    "military": ("MILITARY OR SECURITY: do not publish; ask the competent authority before any further step.",),
    "space": (
        "SPACE: not for collision avoidance or manoeuvre decisions. Operators and the authorised space-surveillance services decide.",
    ),
}

EMITTER_CLASSES = (*_BY_CLASS, "broadcast", "amateur", "unknown")
"""Classes that a pipeline file may declare."""


def cautions_for(emitter_classes: Iterable[str]) -> tuple[str, ...]:
    """Return the cautions of the declared classes, most urgent first, then the general ones.

    Raises
    ------
    ValueError
        For a class that is not in `EMITTER_CLASSES`.
    """
    declared = tuple(emitter_classes)
    unknown = [c for c in declared if c not in EMITTER_CLASSES]
    if unknown:
        raise ValueError(f"unknown emitter class {unknown[0]!r}; allowed: {', '.join(EMITTER_CLASSES)}")
    specific = [text for name, texts in _BY_CLASS.items() if name in declared for text in texts]
    return (*specific, *_GENERAL)
