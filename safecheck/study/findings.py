"""Figures as they are gathered, and those that compare others."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from safecheck.record.transforms import Finding, Fixed
from safecheck.study.subject import Subject

__all__ = ["Findings", "comparisons"]


@dataclass(slots=True)
class Findings:
    """Figures of one frame, in the order in which they were found."""

    subject: Subject
    found: list[Finding] = field(default_factory=list)

    def add(
        self,
        measure: str,
        value: float | None,
        *,
        area: str = "",
        transform: str = "",
        size: int | None = None,
        fixed: tuple[Fixed, float | None] = ("", None),
    ) -> None:
        """Add a figure; one that does not exist is left out."""
        if value is not None:
            self.found.append(Finding(area, transform, size, *fixed, measure, float(value)))

    def add_errors(self, errors: Mapping[str, float], transform: str, size: int, fixed: tuple[Fixed, float]) -> None:
        """Add root mean squares of errors in stored values, by area."""
        for area, value in errors.items():
            scaled = value * self.subject.scale
            self.add("rmse", scaled, area=area, transform=transform, size=size, fixed=fixed)


def comparisons(findings: Iterable[Finding]) -> list[Finding]:
    """Set each root mean square error against the cosine transform's, and against that of the best tile size.

    Returns
    -------
    list of Finding
        Where what it is set against is zero there is none.
    """
    errors = [finding for finding in findings if finding.measure == "rmse"]
    cosine = {_place(item, with_size=True): item.value for item in errors if item.transform == "cosine"}
    best: dict[tuple[object, ...], float] = {}
    for item in errors:
        place = (item.transform, *_place(item))
        best[place] = min(item.value, best.get(place, item.value))
    made = []
    for item in errors:
        for measure, against in (
            ("rmse_over_cosine", cosine[_place(item, with_size=True)]),
            ("rmse_over_best_size", best[item.transform, *_place(item)]),
        ):
            if against > 0:
                made.append(
                    Finding(
                        item.area,
                        item.transform,
                        item.tile_size,
                        item.fixed,
                        item.fixed_at,
                        measure,
                        item.value / against,
                    )
                )
    return made


def _place(item: Finding, *, with_size: bool = False) -> tuple[object, ...]:
    """What two figures share to be compared."""
    return item.area, item.fixed, item.fixed_at, item.tile_size if with_size else None
