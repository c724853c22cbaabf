"""The plan: read whole, or the key at fault named by its dotted path."""

from __future__ import annotations

import json
from typing import Any

import pytest
import rfc8785

from safecheck.documents import from_mapping, from_toml
from safecheck.errors import DocumentError
from safecheck.frames import SizeBasis
from safecheck.policy.plan import CandidatePlan, Plan, asked_of, plan_hash

PLAN = """
version = 1

[change]
title = "CT archive copies at 10:1"
declared_by = "medical physicist"
declared_on = 2026-11-30
compressed_copy = "archive copy"
compressed_when = "90 days after the report"

[sample]
drawn = "chosen"

[[candidates]]
codec = "jpeg2000"
ratio = 10

[[candidates]]
codec = "tiled"
ratio = 8.5
basis = "content"
status = "context"
settings = { size = 16 }

[[windows]]
label = "brain"
centre = 40
width = 80
unit = "HU"

[[limits]]
name = "body RMSE"
measure = "rmse_content"
unit = "HU"
at_most = 8
declared_by = "medical physicist"
declared_on = 2026-11-30
"""


def test_a_plan_is_read_with_its_defaults() -> None:
    plan = from_toml(Plan, PLAN)
    assert [candidate.name for candidate in plan.candidates] == [
        "jpeg2000 10:1",
        "tiled 8.5:1 of content, size 16",
    ]
    assert plan.candidates[0].basis is SizeBasis.BITS_STORED
    assert plan.limits[0].bound == 8
    assert plan.controls.share_percent == 5


@pytest.mark.parametrize(
    ("found", "put", "message"),
    [
        pytest.param('unit = "HU"\nat_most', "at_most", r"^limits\[0\]\.unit: this key is missing", id="missing unit"),
        pytest.param("ratio = 10", "ration = 10", r"^candidates\[0\]\.ration: this key is unknown", id="unknown key"),
        pytest.param("ratio = 10", 'ratio = "10"', r"^candidates\[0\]\.ratio: ", id="a text for a number"),
        pytest.param("ratio = 10", "ratio = 1", r"^candidates\[0\]\.ratio: .*greater than 1", id="a ratio of 1"),
        pytest.param("ratio = 10", "ratio = inf", r"^candidates\[0\]\.ratio: ", id="an infinite ratio"),
        pytest.param("at_most = 8", "at_most = 8\nat_least = 1", r"^limits\[0\]: one of at_most", id="two bounds"),
        pytest.param("at_most = 8", "", r"^limits\[0\]: one of at_most and at_least", id="no bound"),
        pytest.param("width = 80", "width = 0.5", r"^windows\[0\]: a LINEAR window is at least 1", id="narrow window"),
        pytest.param('drawn = "chosen"', 'drawn = "lucky"', r"^sample\.drawn: .*'random'", id="unknown draw"),
        pytest.param(
            'declared_by = "medical physicist"\ndeclared_on = 2026-11-30\ncompressed',
            'declared_by = "to be filled in: a role"\ndeclared_on = 2026-11-30\ncompressed',
            r"^change: declared_by is still to be filled in",
            id="unfilled draft",
        ),
        pytest.param("[sample]", "[samples]", r"^samples: this key is unknown", id="unknown table"),
        pytest.param("version = 1", "version = 2", r"^version: ", id="another version"),
        pytest.param("version = 1", "version = ", "not a TOML document", id="no TOML"),
        pytest.param('codec = "tiled"\nratio = 8.5\nbasis = "content"', 'codec = "tiled"\nratio = 8.5\nbasis = "bytes"',
                     r"^candidates\[1\]\.basis: ", id="unknown basis"),
    ],
)  # fmt: skip
def test_a_wrong_key_is_named_by_its_path(found: str, put: str, message: str) -> None:
    assert found in PLAN
    with pytest.raises(DocumentError, match=message):
        from_toml(Plan, PLAN.replace(found, put, 1))


def test_two_candidates_of_one_name_are_refused() -> None:
    twice = PLAN + '\n[[candidates]]\ncodec = "jpeg2000"\nratio = 10.0\n'
    with pytest.raises(DocumentError, match="candidates need different names, found 'jpeg2000 10:1' twice"):
        from_toml(Plan, twice)


def test_the_hash_does_not_depend_on_comments_or_order_of_keys() -> None:
    turned = PLAN.replace('codec = "jpeg2000"\nratio = 10', 'ratio = 10 # of bits stored\ncodec = "jpeg2000"')
    assert plan_hash(from_toml(Plan, turned)) == plan_hash(from_toml(Plan, PLAN))
    assert plan_hash(from_toml(Plan, PLAN.replace("at_most = 8", "at_most = 9"))) != plan_hash(from_toml(Plan, PLAN))


@pytest.mark.parametrize(
    ("candidate", "name", "asked"),
    [
        ({"codec": "jpeg", "settings": {"quality": 85}}, "jpeg, quality 85", "setting"),
        ({"codec": "tiled", "settings": {"step": 2.5, "size": 16}}, "tiled, size 16, step 2.5", "setting"),
        ({"codec": "jpeg2000", "ratio": 10}, "jpeg2000 10:1", "ratio per frame"),
        ({"codec": "jpeg2000", "ratio": 10, "per": "series"}, "jpeg2000 10:1 per series", "ratio per series"),
        (
            {"codec": "tiled", "ratio": 2.5, "per": "series", "basis": "lossless", "settings": {"size": 16}},
            "tiled 2.5:1 of lossless per series, size 16",
            "ratio per series",
        ),
    ],
    ids=["setting", "two settings", "per frame", "per series", "per series, on a basis, with a setting"],
)
def test_a_candidate_is_named_by_what_it_asks(candidate: dict[str, Any], name: str, asked: str) -> None:
    read = from_mapping(CandidatePlan, candidate)
    assert read.name == name
    assert asked_of(read.ratio, read.per) == asked


@pytest.mark.parametrize(
    ("candidate", "message"),
    [
        ({"codec": "jpeg", "per": "series", "settings": {"quality": 85}}, "per = 'series' is expected with a ratio"),
        ({"codec": "jpeg", "basis": "now", "settings": {"quality": 85}}, "basis is expected with a ratio"),
        ({"codec": "jpeg", "ratio": 10, "per": "study"}, "per"),
    ],
    ids=["per series", "basis", "per what"],
)
def test_what_goes_with_a_ratio_is_refused_without_one(candidate: dict[str, Any], message: str) -> None:
    with pytest.raises(DocumentError, match=message):
        from_mapping(CandidatePlan, candidate)


def test_two_candidates_of_one_name_by_setting_are_refused() -> None:
    twice = PLAN.replace(
        "[[windows]]", "[[candidates]]\ncodec = 'jpeg'\nsettings = { quality = 85 }\n\n" * 2 + "[[windows]]"
    )
    with pytest.raises(DocumentError, match="'jpeg, quality 85' twice"):
        from_toml(Plan, twice)


@pytest.mark.parametrize("value", [8, 8.0, 0.1, 2.0**-7, 1e-9, 123456.5, True, "perceptual"])
def test_a_name_outlives_the_canonical_form_of_the_plan(value: float | bool | str) -> None:
    plan = from_toml(Plan, PLAN)
    candidate = CandidatePlan(codec="tiled", settings={"step": value})
    changed = plan.model_copy(update={"candidates": (candidate,)})
    content = json.loads(rfc8785.dumps(changed.model_dump(mode="json")))
    again = Plan.model_validate_json(json.dumps(content), strict=True)
    assert again.candidates[0].name == candidate.name
    assert again.candidates[0].settings == candidate.settings
