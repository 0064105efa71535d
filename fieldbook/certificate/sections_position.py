"""Sections on coordinates, uncertainty and frames (facts in, blocks out)."""

from __future__ import annotations

from fieldbook.certificate.blocks import Block, Bullets, Pairs, Section, Sentences, Table, said, trimmed
from fieldbook.model.canonical import Tree


def _place(facts: Tree) -> Tree:
    """The position that is certified: the client's, or the receiver's where there is no other."""
    found: Tree = facts["position"]["client"] or facts["position"]["receiver"]
    return found


def box_rows(facts: Tree) -> list[list[str]]:
    """Label, value, unit, 95 % of the main box; the circle of latitude and longitude is `circle_text`."""
    printed = _place(facts)["printed"]
    rows = [
        ["Latitude", *printed["latitude"].split(" "), ""],
        ["Longitude", *printed["longitude"].split(" "), ""],
        [
            "Ellipsoidal height",
            said(printed["height_m"]),
            "m" if printed["height_m"] else "",
            f"± {printed['vertical95_m']} m" if printed["vertical95_m"] else "not stated",
        ],
    ]
    height = facts["position"]["height"]
    if height is not None:
        stated = height["printed"]["vertical95_m"]
        heading = height["heading"]
        rows.append(
            [
                heading[:1].upper() + heading[1:],
                height["printed"]["value_m"],
                "m",
                f"± {stated} m" if stated else "no stated 95 %",
            ]
        )
    return rows


def box_head(facts: Tree) -> str:
    """Frame and epoch of the main box; says so where these are not the client's coordinates."""
    if facts["position"]["client"] is None:
        return f"Not in the client's frame, as observed: {frame_text(_place(facts))}"
    return frame_text(_place(facts))


def circle_text(facts: Tree) -> str:
    """The 95 % figure of the plan position."""
    return f"{_place(facts)['printed']['horizontal95_m']} m"


def grid_rows(facts: Tree) -> list[list[str]]:
    """Label, value, unit of the grid coordinates, factors included."""
    grid = facts["position"]["grid"]
    if grid is None:
        return []
    printed = grid["printed"]
    rows = [
        ["Easting", printed["easting_m"], "m"],
        ["Northing", printed["northing_m"], "m"],
        ["Convergence", printed["convergence"], ""],
        ["Scale factor", printed["scale_factor"], ""],
    ]
    if printed["combined_factor"] is not None:
        rows += [
            ["Elevation factor", printed["elevation_factor"], ""],
            ["Combined factor", printed["combined_factor"], ""],
        ]
    return rows


def geocentric_rows(facts: Tree) -> list[list[str]]:
    """Label, value, unit of the geocentric coordinates and the undulation."""
    client, height = facts["position"]["client"], facts["position"]["height"]
    rows = []
    if client is not None and client["printed"]["x_m"] is not None:
        rows = [[axis.upper(), client["printed"][f"{axis}_m"], "m"] for axis in "xyz"]
    if height is not None:
        rows.append(["Geoid separation N", height["printed"]["undulation_m"], "m"])
    return rows


def frame_text(place: Tree) -> str:
    """`GDA2020 (EPSG:7843), static frame`, or with its epoch."""
    epoch = "static frame" if place["epoch"] is None else f"epoch {place['epoch']}"
    return f"{place['frame_name']} ({place['frame']}), {epoch}"


def frame_lines(facts: Tree) -> list[str]:
    """Frame, epoch, grid and height model of the box, one line each."""
    lines = [_observed_text(facts)]
    grid, height = facts["position"]["grid"], facts["position"]["height"]
    if grid is not None:
        lines.append(f"Grid: {grid['crs_name']} ({grid['crs']})")
    if height is not None:
        datum = height["datum"] or "no national height datum"
        lines.append(f"Heights: ellipsoidal; H = h − N with {height['model_name']}, {datum}")
    else:
        lines.append("Heights: ellipsoidal only, no geoid model")
    lines.append("95 %: expanded uncertainty in plan (radius of the circle) and height; all lengths in metres")
    return lines


def _observed_text(facts: Tree) -> str:
    receiver, operation = facts["position"]["receiver"], facts["operation"]
    observed = facts["occupation"]["epoch_of_observation"]
    text = f"Observed at epoch {said(observed)} in {receiver['frame_name']} ({receiver['frame']})"
    if receiver["epoch"] is not None and receiver["epoch"] != observed:
        text += f", epoch {receiver['epoch']}"
    steps = [
        f"{step['authority']}:{step['code']}" + (" inverse" if step["inverse"] else "") for step in operation["steps"]
    ]
    if facts["position"]["client"] is not None and steps:
        text += f"; carried to the client's frame by {', '.join(steps)}"
    return text


def running_head(facts: Tree) -> str:
    """The line that stands on every later page: frame, epoch, factors, heights, unit, field date."""
    place, grid, height = _place(facts), facts["position"]["grid"], facts["position"]["height"]
    parts = [frame_text(place)]
    if grid is not None:
        parts.append(grid["crs_name"].split("/")[-1].strip())
        if grid["printed"]["combined_factor"]:
            parts.append(f"combined factor {grid['printed']['combined_factor']}")
    parts.append(height["model_name"] if height else "ellipsoidal heights only")
    parts.append("metres")
    if facts["occupation"]["started"]:
        parts.append(f"observed {facts['occupation']['started'][:10]}")
    return " · ".join(parts)


def as_observed(facts: Tree) -> Section:
    """The receiver's frame: what was measured, with its own uncertainty statement."""
    place = facts["position"]["receiver"]
    printed = place["printed"]
    vertical = printed["vertical95_m"]
    rows = [
        ["Frame", f"{place['frame_name']} ({place['frame']})"],
        ["Epoch", said(place["epoch"]) if place["epoch"] else "static frame"],
        ["Latitude, longitude", f"{printed['latitude']}  {printed['longitude']}"],
        ["Ellipsoidal height", f"{printed['height_m']} m" if printed["height_m"] else "not stated"],
        ["95 %, plan", f"{printed['horizontal95_m']} m, radius of the circle"],
        ["95 %, height", f"± {vertical} m" if vertical else "not stated"],
        ["Unrounded", f"{place['lat_deg']}°, {place['lon_deg']}°, {trimmed(place['h_m'], 'm')}"],
    ]
    client = facts["position"]["client"]
    if client is not None:
        rows.append(
            [
                "Unrounded, client's frame",
                f"{client['lat_deg']}°, {client['lon_deg']}°, {trimmed(client['h_m'], 'm')}",
            ]
        )
    return Section("The mark in the receiver's frame, as observed", [Pairs(rows)])


def uncertainty(facts: Tree) -> Section:
    """Both statements, how they were obtained, and the budget."""
    measured, client = facts["uncertainty"]["receiver"], facts["uncertainty"]["client"]
    blocks: list[Block] = [Sentences([measured["printed"]["sentence"], measured["printed"]["obtained"]])]
    if client is not None:
        blocks.append(Sentences([client["printed"]["sentence"], client["printed"]["obtained"]]))
    correlation = measured["correlation_time_s"]
    words = f"Method: {measured['method']}."
    if correlation is not None:
        words += f" Correlation time of the errors about {float(correlation):.0f} s."
    blocks.append(Sentences([words]))
    if client is None:
        blocks.append(_budget("Budget, receiver's frame", measured, []))
    elif [line for line in client["budget"] if line in measured["budget"]] == measured["budget"]:
        total = ["Combined, receiver's frame", "", "", *measured["printed"]["combined"], *_dofs(measured), ""]
        blocks.append(_budget("Budget, client's frame and receiver's frame", client, [total]))
    else:
        blocks.append(_budget("Budget, receiver's frame", measured, []))
        blocks.append(_budget("Budget, client's frame", client, []))
    notes = [
        f"{line['source']}: {line['note'].rstrip('. ')}." for line in (client or measured)["budget"] if line["note"]
    ]
    common = (client or {}).get("common")
    if common:
        notes.append("Common to all marks of this job: " + "; ".join(common) + ".")
    if notes:
        blocks.append(Bullets(notes))
    return Section("Uncertainty of measurement", blocks)


def _dofs(statement: Tree) -> list[str]:
    """The smallest effective degrees of freedom; all three stand in the statement above the budget."""
    values = [value for value in statement["printed"]["dof_enu"] if value not in {"∞", "–"}]
    return [f"≥ {min(values, key=float)}" if values else "∞"]


def _budget(caption: str, statement: Tree, before_last: list[list[str]]) -> Table:
    unit = statement["printed"]["budget_unit"]
    rows = [
        [
            line["source"],
            line["type"],
            line["distribution"],
            *line["printed"]["u"],
            line["printed"]["dof"],
            "all marks" if line["common"] else "",
        ]
        for line in statement["budget"]
    ]
    label = "Combined, client's frame" if before_last else "Combined"
    rows += [*before_last, [label, "", "", *statement["printed"]["combined"], *_dofs(statement), ""]]
    heads = [
        "Source",
        "Type",
        "Distribution",
        f"u east, {unit}",
        f"u north, {unit}",
        f"u up, {unit}",
        "dof",
        "Common to",
    ]
    return Table(heads, "lclrrrrl", rows, f"{caption}: standard uncertainties", len(before_last) + 1)


def frames(facts: Tree) -> Section:
    """Frame operation step by step, declarations, geoid model, convergence and factors."""
    operation, grid, height = facts["operation"], facts["position"]["grid"], facts["position"]["height"]
    rows = [
        ["Operation", operation["name"] or "none needed: same frame and epoch"],
        ["Epoch of the operation", said(operation["coordinate_epoch"])],
        ["Inside its area of use", "yes" if operation["area_ok"] else "no, accepted by decision"],
    ]
    if operation["accuracy_sum_m"] is not None:
        rows.append(["Sum of stated accuracies", trimmed(operation["accuracy_sum_m"], "m")])
    if operation["shift_enu_m"]:
        east, north, up = (trimmed(value, decimals=3) for value in operation["shift_enu_m"])
        rows.append(["Effect east, north, up", f"{east} m, {north} m, {up} m"])
    if facts["realisation"]:
        rows.append(["Realisation", facts["realisation"]])
    blocks: list[Block] = [Pairs(rows)]
    if operation["steps"]:
        blocks.append(_steps(operation))
    declared = [
        f"{item['code']} taken as {item['as_code']}, standard uncertainty {item['sigma_m']} m; "
        f"source: {item['source']}."
        for item in facts["taken_as"]
    ] + [_motion_text(item) for item in facts["motion"]]
    if declared:
        blocks.append(Bullets(declared))
    blocks.append(Pairs(_model_rows(grid, height)))
    return Section("Frames, height model and grid", blocks)


def _motion_text(item: Tree) -> str:
    """The stated motion; that it was applied, and over which years, stands among the steps."""
    if item["velocity_m_per_year"]:
        parts = ", ".join(trimmed(value, "m") for value in item["velocity_m_per_year"])
        what = f"velocity X, Y, Z {parts} a year"
    else:
        what = f"plate model {item['model']}, plate {item['plate']}"
    sigma = trimmed(item["sigma_m_per_year"], "m")
    return f"Motion stated: {what}; standard uncertainty {sigma} a year; source: {said(item['source'])}."


def _steps(operation: Tree) -> Table:
    rows = [
        [
            f"{step['authority']}:{step['code']}" + (" inverse" if step["inverse"] else ""),
            step["name"] + (f" ({step['remark']})" if step["remark"] else ""),
            step["printed"],
        ]
        for step in operation["steps"]
    ]
    rows += [["grid", f"{item['name']}, SHA-256 {item['sha256']}", ""] for item in operation["grids"]]
    return Table(["Step", "Name", "Accuracy stated"], "llr", rows)


def _model_rows(grid: Tree | None, height: Tree | None) -> list[list[str]]:
    rows = []
    if height is not None:
        stated = height["printed"]["undulation_u_m"]
        rows += [
            ["Geoid model", f"{height['model_name']} ({height['model']}), frame {height['model_frame']}"],
            ["Its SHA-256", height["model_sha256"]],
            ["Its standard uncertainty", f"{stated} m" if stated else "not stated by the model"],
            ["Vertical datum", height["datum"] or "none: not a height in a national height datum"],
        ]
    else:
        rows.append(["Geoid model", "none: no height by a geoid model is given"])
    if grid is not None:
        rows += [
            ["Grid", f"{grid['crs_name']} ({grid['crs']})"],
            ["Sign of the convergence", grid["convergence_sign"]],
            ["Use of the factors", grid["factor_meaning"]],
        ]
    else:
        rows.append(["Grid", "none asked for"])
    return rows
