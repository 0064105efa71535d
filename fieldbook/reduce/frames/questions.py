"""What corrects the receiver leads to the frame and epoch to record: what is known, what must be asked, and of whom.

Nothing here is a default. Each answer says which frame follows, or who alone can tell it, and lists frames that are
plausible at the place so that a wrong answer is noticed. Sources: check values and common practice of the trade, no
document; the operator of a network or service is always the authority.
"""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.errors import UsageError
from fieldbook.reduce.frames.catalogue import national_frames
from fieldbook.reduce.frames.registry import FrameInfo, frame_info

BROADCAST = "EPSG:10605"  # WGS 84 (G2296), what the satellites broadcast since January 2024 (from memory, medium)
_GLOBAL = ("EPSG:9989", "EPSG:10177", "EPSG:7912", "EPSG:9379", "EPSG:9018", "EPSG:7911")

QUESTION = "What corrects this receiver?"


@dataclass(frozen=True)
class Answer:
    """One answer to `QUESTION`.

    kind: the word of [corrections]. words: how a party says it. means: what follows for the frame. ask: questions to put,
    each with who knows. write: lines of the session file, with dots where the answer goes. global_frames: plausible
    codes everywhere. local: whether frames of the place are plausible too. beware: what goes wrong.
    """

    kind: str
    words: str
    means: str
    ask: tuple[str, ...]
    write: tuple[str, ...]
    global_frames: tuple[str, ...]
    local: bool
    beware: str


ANSWERS = (
    Answer(
        "none",
        "nothing: the receiver alone",
        "The coordinates are those of the broadcast orbits: the current realisation of WGS 84, at the moment of observation.",
        ("The receiver's settings: is a local datum switched on? Its datum sentence (DTM) must say W84.",),
        (f'receiver = "{BROADCAST}"', 'receiver_epoch = "observation"'),
        (BROADCAST,),
        False,
        "Good to metres: enough to find a mark, not to make one. Other realisations of WGS 84 lie centimetres away.",
    ),
    Answer(
        "satellite",
        "a service by satellite (augmentation or precise point positioning)",
        "The coordinates are in the frame of the service, as a rule an ITRF or IGS realisation at the moment of observation.",
        (
            "The service's own description: which realisation (ITRF2020, ITRF2014 ...), and at which epoch?",
            "The receiver's settings: does it turn the service's coordinates into a national frame, and by what parameters?",
        ),
        ('receiver = "EPSG:...."', 'receiver_epoch = "observation"   # or the year the service states'),
        _GLOBAL,
        False,
        "From one ITRF to the next is millimetres, to a national frame decimetres to metres. The datum sentence tells neither.",
    ),
    Answer(
        "own base on known mark",
        "our own base, on a mark with known coordinates",
        "The coordinates are in the frame and at the epoch of the coordinates keyed into the base, not of the observation.",
        (
            "The certificate of the base mark: frame with realisation, and epoch.",
            "Whoever set up the base: were these very figures keyed in, with the height of the antenna?",
        ),
        (
            'receiver = "EPSG:...."',
            "receiver_epoch = ....             # of the base's coordinates; only in a moving frame",
        ),
        _GLOBAL,
        True,
        "A base in a moving frame carries the epoch of its own coordinates to every mark: 'observation' would be wrong then.",
    ),
    Answer(
        "own base on unknown mark",
        "our own base, on a mark whose position the receiver found itself",
        "The coordinates are in the frame in which the base found its position, and no better than that position.",
        (
            "Whoever set up the base: how did it find its position? Alone: see 'nothing'. By a service: see 'satellite'.",
            "The office: will the base be tied to a known mark afterwards? Then its coordinates replace these.",
        ),
        (
            f'receiver = "{BROADCAST}"           # where the base found its position alone',
            'receiver_epoch = "observation"',
        ),
        (BROADCAST, *_GLOBAL),
        False,
        "All marks are wrong by what the base is wrong, often by metres, and nothing observed from it can show it.",
    ),
    Answer(
        "network",
        "a network of reference stations",
        "The coordinates are in the frame in which the operator gives the coordinates of the stations: national, as a rule.",
        (
            "The operator, in writing: frame with realisation and EPSG code; epoch, if it moves; since when.",
            "The operator: does the stream carry transformation messages, and does the receiver apply them?",
            "The survey authority: is that realisation the one the client's coordinates are to be in?",
        ),
        ('receiver = "EPSG:...."', "receiver_epoch = ....             # only if the operator's frame moves"),
        _GLOBAL[:3],
        True,
        "Two networks of one country may use two realisations. 'WGS 84' on the receiver's screen is no answer.",
    ),
)


def answer(kind: str) -> Answer:
    """The answer of that kind.

    Raises:
        UsageError: none of the five.
    """
    for item in ANSWERS:
        if item.kind == kind:
            return item
    raise UsageError(
        f'"{kind}" is none of the answers.',
        f"Say one of: {', '.join(item.kind for item in ANSWERS)}.",
        code="which_kind",
    )


def plausible(item: Answer, place: tuple[float, float] | None) -> list[FrameInfo]:
    """Frames that may be the answer at a place (latitude, longitude), those of the place first. None: no place known."""
    local = national_frames(*place) if place is not None and item.local else []
    return [*local, *(frame_info(code) for code in item.global_frames)]
