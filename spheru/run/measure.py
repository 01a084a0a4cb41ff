"""Label images -> one measurement, as a laboratory reports it: everything put together.

Simulated and photographed maps take the same way. Nothing is read or written here; see
`spheru.image.read` and `spheru.output.measurement`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from spheru import __version__
from spheru.errors import DataError, ValidityError
from spheru.image.label_image import LabelImage
from spheru.measure.intercepts import InterceptCount, count_intercepts
from spheru.measure.labels import connected_patches, sum_labels
from spheru.measure.largest import LargestGrain, largest_grain
from spheru.measure.planimetric import PlanimetricCount, count_grains
from spheru.measure.shapes import Shapes, measure_shapes
from spheru.measure.sizes import EdgeRule, Kind, Sizes, Weighting, pool_sizes, sizes_of_sums
from spheru.measure.stereology import (
    SpaceEstimate,
    Unfolding,
    linear_edges,
    space_from_intercept,
    unfold_spheres,
)

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from numpy.typing import NDArray

    from spheru.measure.intervals import Statistic

__all__ = ["MeasuredField", "Measurement", "measure_images"]

_FORMAT_VERSION: Final = 1
_NOISE: Final = 8.0  # pixels a patch on the mean: fewer, and each label in many, is a photograph
_MANY: Final = 20.0  # patches a label
_COARSE: Final = 10.0  # pixels across the mean spherulite below which shapes say little
_WIDE: Final = 0.2  # width of an interval by its mean
_APART: Final = 0.5  # share of the picture that spheres hardly touching fill at most
_CLASSES: Final = 8  # of the unfolding: more make it noise
_FULL: Final = (
    0.9  # share of a picture with labels from which on it shows a space-filling structure
)
_ACCURACY: Final = 0.1  # relative accuracy that is usually accepted for counts


@dataclass(frozen=True, slots=True, kw_only=True)
class MeasuredField:
    """One picture, measured.

    Attributes
    ----------
    name : str
        What it is called, such as the name of its file.
    image : LabelImage
        What was measured: the labels, or the numbers of the patches where these were measured.
    owner : ndarray of uint32, shape (n,)
        Label in the picture of each row of the sizes.
    labels, patches : int
        Number of labels in the picture, and of the patches that hang together.
    sizes : Sizes
        Sizes of this field.
    shapes : Shapes
        Shapes, row for row.
    """

    name: str
    image: LabelImage
    owner: NDArray[np.uint32]
    labels: int
    patches: int
    sizes: Sizes
    shapes: Shapes


@dataclass(frozen=True, slots=True, kw_only=True)
class Measurement:
    """What one or several fields of a material measure.

    Attributes
    ----------
    fields : tuple of MeasuredField
        The pictures.
    sizes : Sizes
        The spherulites of all fields together.
    shapes : Shapes
        Their shapes, row for row.
    planimetric : PlanimetricCount or None
        Count in test areas; None for a body.
    intercepts : InterceptCount or None
        Count along test lines; None for a body.
    largest : LargestGrain or None
        The largest spherulite against the rest; None for a body.
    body : tuple of SpaceEstimate
        What a plane section tells of the body, for each structure, from the mean intercept; none
        for a body, and where labels leave more than a tenth of the picture free.
    spheres : Unfolding or None
        Spheres per volume behind the picture if it is a section through spheres that hardly touch,
        after Schwartz and Saltykov; none for a body, and where labels fill more than half of it.
    summary : mapping
        Headline numbers, the unit in every key (measure.json).
    warnings : tuple of str
        What must be said with the numbers.
    """

    fields: tuple[MeasuredField, ...]
    sizes: Sizes
    shapes: Shapes
    planimetric: PlanimetricCount | None
    intercepts: InterceptCount | None
    largest: LargestGrain | None
    body: tuple[SpaceEstimate, ...]
    spheres: Unfolding | None
    summary: Mapping[str, Any] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()


def measure_images(
    images: LabelImage | Sequence[LabelImage],
    *,
    names: Sequence[str] = (),
    edges: EdgeRule = "auto",
    guard: float | None = None,
    floor: float = 0.0,
    kind: Kind = "label",
    progress: Callable[[str, float], None] | None = None,
) -> Measurement:
    """Measure label images as a laboratory measures micrographs.

    Parameters
    ----------
    images : LabelImage or sequence of LabelImage
        One picture, or several fields of the same material: intervals come from the tiles of the
        one, or from the fields.
    names : sequence of str, optional
        What the pictures are called; numbered without it.
    edges : str, optional
        Edge rule, see `measure_sizes`; "auto" is unbiased.
    guard : float, optional
        Width of the guard of two of the rules [m].
    floor : float, optional
        Equivalent diameter below which a spherulite is not used [m], >= 0. Counts in test areas
        and along test lines know no floor.
    kind : {"label", "patch"}, optional
        Whether a size is that of a label, or of a patch that hangs together.
    progress : callable, optional
        Called with the name of the stage and the share of the whole that is done.

    Returns
    -------
    measurement : Measurement
        Sizes, shapes, counts, numbers and warnings.

    Raises
    ------
    DataError
        If a picture shows no label, a single one, or what looks like a photograph.
    ValidityError
        If floor or guard do not fit, or planes and bodies come together.
    UnknownNameError
        If there is no such edge rule or kind.
    """
    pictures = [images] if isinstance(images, LabelImage) else list(images)
    if not pictures:
        raise ValidityError("measure: expected at least one label image, got none")
    called = list(names) or [f"image {k + 1}" for k in range(len(pictures))]
    if len(called) != len(pictures):
        raise ValidityError(
            f"measure: expected a name for each of {len(pictures)} images, got {len(called)}"
        )
    if len({picture.frame.dimension for picture in pictures}) != 1:
        raise ValidityError("measure: expected planes or bodies alone, got both as fields of one")
    tell = progress or (lambda _stage, _done: None)
    fields = []
    for k, (picture, name) in enumerate(zip(pictures, called, strict=True)):
        tell(name, 0.8 * k / len(pictures))
        fields.append(_measure_field(picture, name, edges, guard, floor, kind))
    measures = [one.image.frame.measure for one in fields]
    sizes = pool_sizes([one.sizes for one in fields], measures)
    shapes = Shapes(
        **{
            key: np.concatenate([getattr(one.shapes, key) for one in fields])
            for key in ("boundary", "aspect", "circularity")
        }
    )
    planimetric = intercepts = largest = None
    body: tuple[SpaceEstimate, ...] = ()
    spheres = None
    if sizes.dimension == 2:
        tell("test areas and lines", 0.8)
        seen = [one.image for one in fields]
        split = 1 if len(seen) > 1 else None
        planimetric = count_grains(seen, split=split)
        each = math.isqrt(len(planimetric.fields) // len(seen))
        intercepts = count_intercepts(seen, split=each)
        largest = largest_grain(sizes.size, frame_area=math.fsum(measures))
        mean = intercepts.mean_intercept
        if _share(fields) >= _FULL and math.isfinite(mean.value) and mean.value > 0:
            body = (
                space_from_intercept(mean, "voronoi"),
                space_from_intercept(mean, "johnson-mehl"),
            )
        used = sizes.weight > 0
        if _share(fields) < _APART and used.any():
            circles = sizes.diameter[used]
            edges_of_classes = linear_edges(float(circles.max()), _CLASSES)
            spheres = unfold_spheres(circles, edges=edges_of_classes, weights=sizes.weight[used])
    warnings = _warnings(fields, sizes, planimetric)
    tell("done", 1.0)
    found = Measurement(
        fields=tuple(fields),
        sizes=sizes,
        shapes=shapes,
        planimetric=planimetric,
        intercepts=intercepts,
        largest=largest,
        body=body,
        spheres=spheres,
        warnings=warnings,
    )
    return Measurement(
        **{name: getattr(found, name) for name in found.__slots__ if name != "summary"},
        summary=_summary(found),
    )


def _measure_field(
    picture: LabelImage,
    name: str,
    edges: EdgeRule,
    guard: float | None,
    floor: float,
    kind: Kind,
) -> MeasuredField:
    patched, owner = connected_patches(picture)
    patches = len(owner) - 1
    labels = len(np.unique(owner[1:]))
    if labels == 0:
        raise DataError(f"{name}: expected labels, got an image of nothing but 0")
    per_patch = np.count_nonzero(picture.labels) / patches
    if patches > _MANY * labels and per_patch < _NOISE:
        raise DataError(
            f"{name}: {labels} labels fall into {patches} patches of {per_patch:.1f} pixels on the "
            "mean: this looks like a photograph, not like labels; segment it first"
        )
    if kind == "label" and labels == 1:
        raise DataError(
            f"{name}: holds one label only ({owner[1]}); if it is a mask of spherulites apart, "
            "measure its patches (--patches), else segment it first"
        )
    image = patched if kind == "patch" else picture
    del patched
    sums = sum_labels(image)
    return MeasuredField(
        name=name,
        image=image,
        owner=owner[sums.label] if kind == "patch" else sums.label,
        labels=labels,
        patches=patches,
        sizes=sizes_of_sums(image, sums, edges=edges, guard=guard, floor=floor, kind=kind),
        shapes=measure_shapes(image, sums),
    )


def _share(fields: Sequence[MeasuredField]) -> float:
    """Return the share of all pixels that carry labels."""
    labelled = sum(int(one.sizes.pixels.sum()) for one in fields)
    return labelled / sum(one.image.frame.pixels for one in fields)


def _warnings(
    fields: Sequence[MeasuredField],
    sizes: Sizes,
    planimetric: PlanimetricCount | None,
) -> tuple[str, ...]:
    notes = []
    labels, patches = (sum(getattr(one, key) for one in fields) for key in ("labels", "patches"))
    if sizes.kind == "label" and patches > labels:
        notes.append(
            f"{labels} labels fall into {patches} patches; a size is that of a label (--patches "
            "measures each patch apart)"
        )
    if sizes.edge_rule in ("none", "exclude") and sizes.touches_edge.any():
        notes.append(
            f"the edge rule '{sizes.edge_rule}' is biased: sizes read too small; "
            "miles-lantuejoul, counting-frame and guard-frame are not"
        )
    if sizes.spanning:
        notes.append(
            f"{sizes.spanning} spherulites reach across the whole window: sizes read too small"
        )
    if sizes.lost:
        notes.append(
            f"{sizes.lost} spherulites of the inner window reach the edge and cannot be measured: "
            "sizes read too small; choose a wider guard"
        )
    mean = sizes.statistics.number_mean_diameter
    if not math.isfinite(mean.low):
        notes.append(
            "too few spherulites for 95 % intervals: measure a larger picture or more fields"
        )
    elif mean.high - mean.low > _WIDE * mean.value:
        notes.append(
            "the 95 % interval of the mean diameter is wider than 20 % of it: measure more fields"
        )
    return (*notes, *_notes_on_counts(fields, sizes, planimetric))


def _notes_on_counts(
    fields: Sequence[MeasuredField], sizes: Sizes, planimetric: PlanimetricCount | None
) -> list[str]:
    """Return what must be said with shapes and grain-size numbers."""
    notes = []
    mean = sizes.statistics.number_mean_diameter
    if sizes.dimension == 2 and _share(fields) < _FULL:
        notes.append(
            f"{100 * _share(fields):.0f} % of the picture carries labels: grain-size numbers are "
            "meant for structures that fill it"
        )
    pixel = max(one.image.frame.pixel for one in fields)
    if mean.value < _COARSE * pixel:
        notes.append(
            f"the mean spherulite is {mean.value / pixel:.1f} pixels across: below {_COARSE:.0f} "
            "perimeter and circularity say little, and small ones are missed"
        )
    if planimetric is not None:
        counted = planimetric.per_area
        reached, needed = counted.relative_accuracy, counted.fields_needed(_ACCURACY)
        if reached > _ACCURACY and needed is not None:
            notes.append(
                f"the planimetric count has a relative accuracy of {100 * reached:.0f} %; 10 % "
                f"would take about {needed} such fields, {needed - counted.fields} more"
            )
    return notes


def _summary(found: Measurement) -> dict[str, Any]:
    sizes = found.sizes
    statistics, axes = sizes.statistics, sizes.dimension
    body, area = axes == 3, axes == 2
    size, unit = ("volume", "um3") if body else ("area", "um2")
    summary: dict[str, Any] = {
        "format_version": _FORMAT_VERSION,
        "spheru_version": __version__,
        "measured": {
            "what": "equivalent diameter of a "
            + ("label" if sizes.kind == "label" else "connected patch")
            + (", by volume in a body" if body else ", by area in a plane"),
            "kind": sizes.kind,
            "edge_rule": sizes.edge_rule,
            "guard_um": sizes.guard * 1e6,
            "detection_floor_um": sizes.floor * 1e6,
            "spherulites": len(sizes),
            "used": sizes.count,
            "touch_the_edge": int(sizes.touches_edge.sum()),
            "intervals": f"95 %, {_interval_source(found)}",
        },
        "fields": [
            {
                "name": one.name,
                "pixels": list(one.image.frame.shape[::-1]),
                "pixel_um": one.image.frame.pixel * 1e6,
                "labels": one.labels,
                "patches": one.patches,
                "used": one.sizes.count,
                "number_mean_diameter_um": _number(
                    one.sizes.statistics.number_mean_diameter.value * 1e6
                ),
            }
            for one in found.fields
        ],
    }
    summary |= _with_interval(f"number_density_per_mm{axes}", statistics.number_density, 1e-3**axes)
    summary |= _with_interval("number_mean_diameter_um", statistics.number_mean_diameter, 1e6)
    weighted: tuple[Weighting, ...] = ("area", "volume")
    for weighting in weighted:
        mean = (
            statistics.size_weighted_mean_diameter
            if weighting == size
            else sizes.mean(sizes.diameter, weighting=weighting)
        )
        summary |= _with_interval(f"{weighting}_weighted_mean_diameter_um", mean, 1e6)
    summary |= _with_interval("diameter_standard_deviation_um", statistics.diameter_sd, 1e6)
    for weighting in ("number", *weighted):
        three = sizes.quantiles([0.1, 0.5, 0.9], weighting=weighting)
        for share, diameter in zip((10, 50, 90), three.tolist(), strict=True):
            summary[f"diameter_d{share}_by_{weighting}_um"] = _number(diameter * 1e6)
    summary |= _with_interval(f"mean_{size}_{unit}", statistics.mean_size, 1e6**axes)
    summary |= _with_interval("mean_aspect", sizes.mean(found.shapes.aspect), 1.0)
    round_ones = np.nan_to_num(found.shapes.circularity, nan=0.0)
    summary |= _with_interval(
        "mean_sphericity" if body else "mean_circularity", sizes.mean(round_ones), 1.0
    )
    summary |= _with_interval("boundary_density_per_mm", statistics.boundary_density, 1e-3)
    if area:
        summary |= _counts(found)
    summary["warnings"] = list(found.warnings)
    return summary


def _counts(found: Measurement) -> dict[str, Any]:
    """Return what the trade counts in a plane picture."""
    counted, lines, largest = found.planimetric, found.intercepts, found.largest
    numbers: dict[str, Any] = {}
    if counted is not None:
        numbers["planimetric"] = {
            "manner": f"Jeffries, test {counted.area}; corrected: inside + cut/2 - 1",
            "fields": counted.per_area.fields,
            **_with_interval("count_per_mm2", counted.per_area.statistic, 1e-6),
            **_with_interval("uncorrected_per_mm2", counted.uncorrected.statistic, 1e-6),
            "relative_accuracy_percent": _number(100 * counted.per_area.relative_accuracy),
            "fields_needed_for_10_percent": counted.per_area.fields_needed(_ACCURACY),
            **_with_interval("grain_size_number_manner_of_astm_e112", counted.grain_number, 1.0),
            **_with_interval("grain_size_number_manner_of_iso_643", counted.grain_number_iso, 1.0),
        }
    if lines is not None:
        numbers["intercepts"] = {
            "manner": f"Heyn, test {lines.method}",
            "test_lines": len(lines.lines),
            "intercepts": lines.intercepts,
            **_with_interval("mean_intercept_um", lines.mean_intercept, 1e6),
            "relative_accuracy_percent": _number(100 * lines.per_length.relative_accuracy),
            "fields_needed_for_10_percent": lines.per_length.fields_needed(_ACCURACY),
            **_with_interval("grain_size_number_manner_of_astm_e112", lines.grain_number, 1.0),
            "by_direction": [
                {
                    "direction_degrees": math.degrees(one.direction),
                    **_with_interval("mean_intercept_um", one.mean_intercept, 1e6),
                }
                for one in lines.by_direction
            ],
            "anisotropy": _number(lines.anisotropy),
            "pixels_per_intercept": _number(lines.pixels_per_intercept),
            "expected_bias_of_pixels_percent": _number(100 * lines.pixel_bias),
        }
    if largest is not None:
        numbers["largest"] = {
            "manner": "ASTM E930",
            "area_um2": largest.area * 1e12,
            "grain_size_number": _number(largest.number),
            "grain_size_number_of_the_rest": _number(largest.rest_number),
            "applies": largest.applies,
            "reason": largest.reason,
        }
    numbers["body_if_this_is_a_plane_section"] = [
        {
            "structure": one.structure,
            "from": "mean intercept",
            **_with_interval("number_density_per_mm3", one.number_density, 1e-9),
            **_with_interval("number_mean_diameter_um", one.mean_diameter, 1e6),
            **_with_interval("boundary_density_per_mm", one.surface_density, 1e-3),
        }
        for one in found.body
    ]
    numbers["spheres_if_this_is_a_section_through_them"] = _spheres(found.spheres)
    return numbers


def _spheres(found: Unfolding | None) -> dict[str, Any] | None:
    if found is None:
        return None
    return {
        "manner": "Schwartz and Saltykov, linear classes",
        "class_edges_um": [edge * 1e6 for edge in found.edges],
        "circles_per_mm2": [number * 1e-6 for number in found.per_area],
        "spheres_per_mm3": [number * 1e-9 for number in found.per_volume],
        "standard_error_per_mm3": [number * 1e-9 for number in found.error],
        "number_density_per_mm3": found.number_density * 1e-9,
        "condition_number": found.condition,
        "warning": found.warning,
    }


def _interval_source(found: Measurement) -> str:
    if len(found.fields) > 1:
        return f"from the scatter of {len(found.fields)} fields (jackknife, Student's t)"
    return "from the long waves over 8 tiles an axis"


def _with_interval(key: str, statistic: Statistic, factor: float) -> dict[str, float | None]:
    return {
        key: _number(statistic.value * factor),
        f"{key}_ci95_low": _number(statistic.low * factor),
        f"{key}_ci95_high": _number(statistic.high * factor),
    }


def _number(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None
