"""The one gateway to PROJ: frames, epochs, grids and geoid files. No other module imports pyproj.

PROJ's network access is switched off here, in code, whatever the environment says: the result must not depend on
whether there was a connection.

    registry     what a frame is               choice      is a choice complete: check_frames, epochs
    candidates   PROJ's offers, judged         route       which of them: direct, equalities, by an ITRF
    convert      transform_to_client           projection  project, check_grid        heightgrid  GeoTIFF geoid
    located      typed positions, there and back          geodesic    Karney's, by PROJ
    catalogue    frames by word and place        pair        what a pair would do at a place
    gridfiles    the operator's own transformation grids
    questions    what corrects the receiver          local_plane  a plane of our own, for local grids
"""

from __future__ import annotations

from pyproj import network

network.set_network_enabled(False)  # type: ignore[attr-defined]

from fieldbook.reduce.frames.catalogue import (  # noqa: E402  (the network goes off before anything else)
    ListedGrid,
    frames_by,
    grids_of,
    national_frames,
)
from fieldbook.reduce.frames.choice import (  # noqa: E402
    check_frames,
    check_taken_as,
    client_epoch_of,
    decimal_year,
    motion_of,
    operation_epoch_of,
    receiver_epoch_of,
)
from fieldbook.reduce.frames.convert import (  # noqa: E402
    ellipsoidal_height_difference_to_itrf2020,
    operation_codes,
    transform_to_client,
)
from fieldbook.reduce.frames.flat import FlatFrame, flat_frame  # noqa: E402
from fieldbook.reduce.frames.geodesic import geodesic  # noqa: E402
from fieldbook.reduce.frames.gridfiles import GridFacts, forget_offers, grid_facts, use_grid_folders  # noqa: E402
from fieldbook.reduce.frames.heightgrid import undulation_by_proj, undulations_by_proj  # noqa: E402
from fieldbook.reduce.frames.local_plane import on_local_plane  # noqa: E402
from fieldbook.reduce.frames.located import located, printed  # noqa: E402
from fieldbook.reduce.frames.pair import Considered, Pair, pair_at  # noqa: E402
from fieldbook.reduce.frames.projection import check_grid, project, unproject  # noqa: E402
from fieldbook.reduce.frames.questions import ANSWERS, QUESTION, Answer, answer, plausible  # noqa: E402
from fieldbook.reduce.frames.registry import (  # noqa: E402
    ITRF2020,
    FrameInfo,
    Versions,
    frame_info,
    inside,
    is_global_realisation,
    same_frame,
    versions,
)
from fieldbook.reduce.frames.route import OperationChanged  # noqa: E402
from fieldbook.settings.grids import user_grids_folder  # noqa: E402

__all__ = [
    "ANSWERS",
    "ITRF2020",
    "QUESTION",
    "Answer",
    "Considered",
    "FlatFrame",
    "FrameInfo",
    "GridFacts",
    "ListedGrid",
    "OperationChanged",
    "Pair",
    "Versions",
    "answer",
    "check_frames",
    "check_grid",
    "check_taken_as",
    "client_epoch_of",
    "decimal_year",
    "ellipsoidal_height_difference_to_itrf2020",
    "flat_frame",
    "forget_offers",
    "frame_info",
    "frames_by",
    "geodesic",
    "grid_facts",
    "grids_of",
    "inside",
    "is_global_realisation",
    "located",
    "motion_of",
    "national_frames",
    "on_local_plane",
    "operation_codes",
    "operation_epoch_of",
    "pair_at",
    "plausible",
    "printed",
    "project",
    "receiver_epoch_of",
    "same_frame",
    "transform_to_client",
    "undulation_by_proj",
    "undulations_by_proj",
    "unproject",
    "use_grid_folders",
    "versions",
]

use_grid_folders([user_grids_folder()])
