"""The words of the certificate: codes and keys as a surveyor reads them.

One table per vocabulary, so that all formats use the same words. On paper what was set aside reads 'not used',
fix qualities keep their NMEA 0183 meaning, uncertainty terms are those of the GUM.
"""

from __future__ import annotations

from fieldbook.model.epoch import QUALITY_WORDS, SetAside

NOT_STATED = "not stated"
TITLE = "Certificate of a control mark"

NOT_USED_WORDS: dict[str, str] = {
    SetAside.NO_TIME: "no time of fix",
    SetAside.DATE_UNKNOWN: "date not known",
    SetAside.TIME_BACK: "time earlier than the epoch before",
    SetAside.DUPLICATE: "same sentence sent again",
    SetAside.CONFLICT: "second, different position for the same time",
    SetAside.NO_POSITION: "no readable position",
    SetAside.NO_FIX: "receiver had no fix",
    SetAside.QUALITY: "fix quality not accepted",
    SetAside.STATUS: "receiver's status says not valid",
    SetAside.DATUM: "another datum than the one confirmed",
    SetAside.AGE: "corrections too old",
    SetAside.SATELLITES: "too few satellites",
    SetAside.DOP: "dilution of precision over the limit",
    SetAside.GST: "receiver's own error estimate over 100 m",
    SetAside.FROZEN: "output frozen, one position repeated",
    SetAside.OUTLIER: "outlier within its minute",
    SetAside.INITIALISATION: "of an initialisation that is not used",
    SetAside.OPERATOR: "taken out by the observer, with reason",
}

# Requirement keys of the session file -> the line's name on paper, in the order of the session file.
GATE_LINES = ("accept_quality", "max_hdop", "max_pdop", "max_correction_age_s", "min_satellites")
NOT_MET = ("does not meet", "not shown", "not done")
REQUIREMENT_WORDS = {
    "horizontal_95_m": "95 % horizontal, radius of the circle",
    "vertical_95_m": "95 % vertical, half-width",
    "minimum_time_s": "time on the mark",
    "initialisations": "independent initialisations that agree",
    "occupations": "occupations of the mark",
    "hours_between": "hours between occupations",
    "repeats": "occupations that agree with each other",
    "height_readings": "antenna height readings",
    "accept_quality": "fix quality",
    "max_hdop": "HDOP at most",
    "max_pdop": "PDOP at most",
    "max_correction_age_s": "age of corrections at most",
    "min_satellites": "satellites at least",
}
ACCURACY_LINES = ("horizontal_95_m", "vertical_95_m")

DECISION_RULE = (
    "Decision rule: a line 'meets' when the printed 95 % uncertainty itself, rounded up, is not larger than the value "
    "wanted. No guard band is added: the limit is set on the uncertainty, not on a measured value."
)

GOVERNED_WORDS = {
    "class": "the figures known for this kind of fix govern; the occupation is too short for its own scatter to tell",
    "class and data": "partly from the figures known for this kind of fix, partly from this occupation's own data",
    "data": "from this occupation's own data, with the least uncertainty claimed for this kind of fix added",
}

CONVERGENCE_SENTENCE = (
    "azimuth = grid bearing + convergence. The sign is the opposite of manuals that write "
    "grid bearing = azimuth + convergence."
)
FACTOR_SENTENCE = (
    "grid distance = ground distance × combined factor; combined = scale × elevation factor, elevation factor = "
    "R/(R + h) with R the mean radius of curvature at the mark and h the ellipsoidal height."
)

# Parts of the facts as a new revision names them when it says what changed.
PART_WORDS = {
    "position": "coordinates",
    "uncertainty": "uncertainty",
    "operation": "frame operation",
    "mark": "description of the mark",
    "combined": "occupations combined, their weights and agreement",
    "members": "evidence of the occupations",
    "occupation": "epochs and times",
    "setup": "set-up and height readings",
    "antenna": "antenna",
    "receiver": "receiver",
    "corrections": "corrections",
    "requirement": "requirement",
    "findings": "findings",
    "decisions": "decisions",
    "remarks": "remarks",
    "struck": "struck entries",
    "repeats": "repeats",
    "sign_off": "sign-off",
    "job": "client, firm and people",
}

# Which decision answers which finding: the key of a `decision` entry is looked for in the finding's code.
ANSWER_KEYS = {
    "date": ("date",),
    "rollover_weeks": ("rollover", "date"),
    "datum": ("datum",),
    "talker": ("talker",),
    "initialisation": ("initialisation",),
    "operation": ("operation",),
    "accuracy_over_limit": ("accuracy",),
    "outside_area": ("area",),
    "outside_hull": ("hull",),
    "grid_file": ("grid_file",),
}

DECISION_WORDS = {
    "date": "date of the occupation set to {}",
    "rollover_weeks": "receiver's date moved by {} weeks",
    "datum": "local datum {} confirmed",
    "talker": "sentences of talker {} used",
    "initialisation": "initialisation {}",
    "operation": "frame operation {} chosen",
    "accuracy_over_limit": "frame operation over the accuracy limit accepted",
    "outside_area": "use outside the stated area accepted",
    "grid_file": "another grid file accepted, SHA-256 {}",
    "outside_hull": "local coordinates outside the marks of the local grid accepted",
    "height_difference": "height readings that differ stand: {}",
    "not_met": "left with the requirement {} not met",
}

COVERS = (
    "the scatter of the fixes with their correlation in time (epochs are not counted as independent)",
    "the least uncertainty claimed for this kind of fix, which no single occupation can make smaller",
    "the digits the receiver prints, of coordinates and of geoid separation",
    "antenna height readings, centring over the mark, phase centre and plumb line, as far as the budget lists them",
)
COVERS_COMBINED = (
    "of several occupations: what each has of its own, weighted, and in full what they share (half of the least "
    "uncertainty claimed by station and antenna, phase centre, separation of the receiver, frame operation)"
)
COVERS_CLIENT = (
    "for the client's frame also the frame operation, each step with the accuracy its authority states, taken as "
    "one standard uncertainty (the authority gives no probability)"
)
DOES_NOT_COVER = (
    "an ambiguity fix that is wrong in the same way in every initialisation",
    "an error of the base station or of the network's coordinates beyond what the budget lists",
    "movement of the mark after the occupation",
    "occupation of another point than the mark described, or a wrong antenna model",
    "a receiver frame or epoch declared otherwise than its corrections are given in",
)

CADASTRAL = "Not a cadastral determination; local law and a licensed surveyor come first."
BASE_KNOWN = (
    "A wrong coordinate of the base moves every mark observed from it alike, and nothing observed at this mark can "
    "show it. Tie to a known mark that does not depend on that base."
)
BASE_UNKNOWN = (
    "The base stood on a mark without known coordinates: positions are only as good as the position given to the "
    "base, and a wrong base coordinate moves every mark alike."
)
CORRECTION_CAUTIONS = {
    "own base on known mark": BASE_KNOWN,
    "own base on unknown mark": BASE_UNKNOWN,
    "network": "A wrong coordinate or frame of the correction network moves every mark alike. Tie to a known mark.",
    "satellite": (
        "Corrections by satellite are given in the frame of their provider; a wrong frame moves every mark alike."
    ),
    "none": "No corrections were used: the position is autonomous and not fit for control by itself.",
}


def quality_text(qualities: tuple[int, ...]) -> str:
    """`4 RTK fixed, 5 RTK float`."""
    return ", ".join(f"{number} {QUALITY_WORDS.get(number, 'unknown')}" for number in qualities)
