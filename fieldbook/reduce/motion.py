"""What is said of a mark that was moved from one epoch of a moving frame to another: by what, how far, and what to mind."""

from __future__ import annotations

from fieldbook.model.reduction import Finding, Operation
from fieldbook.model.session import FrameChoice
from fieldbook.reduce import frames
from fieldbook.reduce.constants import PLATE_FRAMES
from fieldbook.reduce.terms import MOTION


def motion_findings(choice: FrameChoice, operation: Operation, epoch_of_observation: float) -> list[Finding]:
    """The motion as a finding, and a caution where the plate model belongs to another realisation than the coordinates.

    Empty where nothing was moved.
    """
    step = next((item for item in operation.steps if item.authority == MOTION), None)
    moved = frames.motion_of(choice, epoch_of_observation)
    if step is None or moved is None:
        return []
    stated, have, want = moved
    sigma_mm = 1000 * (step.accuracy_m or 0.0)
    text = (
        f"The mark was moved from epoch {have:.3f} to {want:.3f} by {step.code}, not observed there: standard uncertainty "
        f"{sigma_mm:.1f} mm, in the budget, common to all marks."
    )
    figures = {"from_epoch": have, "to_epoch": want, "motion": step.code, "u_m": step.accuracy_m}
    found = [Finding("moved_between_epochs", "info", text, figures)]
    name = frames.frame_info(choice.receiver).name
    if stated.model is not None and name not in PLATE_FRAMES[stated.model]:
        text = (
            f"The plate model {stated.model} moves coordinates of {name}: another realisation, whose origin drifts against it "
            "by some tenths of a millimetre a year. Widen sigma_m_per_year, or take the model of the frame."
        )
        found.append(Finding("plate_model_of_another_frame", "caution", text, {"model": stated.model, "frame": name}))
    return found
