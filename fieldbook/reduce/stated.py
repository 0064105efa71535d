"""A combined budget as the `Uncertainty` that is printed: one spelling for an occupation and for a combined mark."""

from __future__ import annotations

from fieldbook.model.reduction import BudgetLine, Ellipse95, Uncertainty
from fieldbook.reduce.budget import Combined


def stated_uncertainty(
    combined: Combined,
    lines: list[BudgetLine],
    *,
    correlation_time_s: float | None,
    governed_by: str,
    method: str,
    with_common: bool,
) -> Uncertainty:
    """All figures of a combined budget.

    Args:
        with_common: list the lines that are common to all marks (the client's statement).
    """
    ellipse = combined.region.ellipse
    return Uncertainty(
        u_enu_m=list(combined.u_enu_m),
        cov_en_m2=[list(row) for row in combined.cov_en_m2],
        dof_enu=list(combined.dof_enu),
        k95_enu=list(combined.k95_enu),
        ellipse95=Ellipse95(ellipse.major, ellipse.minor, ellipse.azimuth_deg),
        horizontal95_m=combined.horizontal95_m,
        vertical95_m=combined.vertical95_m,
        correlation_time_s=correlation_time_s,
        governed_by=governed_by,
        method=method,
        budget=lines,
        common=[line.source for line in lines if line.common] if with_common else None,
    )
