import re
from pathlib import Path

import pytest

from safecheck.errors import DossierError, ResumeMismatch, UsageError
from safecheck.runner.manifest import begin
from tests.runner.studies import instance, manifest_of, study, work_of


def test_a_new_an_absent_and_a_begun_folder_can_be_used(tmp_path: Path) -> None:
    manifest = manifest_of(study())
    absent = tmp_path / "deep" / "dossier"
    with begin(absent, manifest) as first:
        path = first.path
    with begin(absent, manifest) as again:
        assert again.path == path
    (tmp_path / "empty").mkdir()
    with begin(tmp_path / "empty", manifest) as held:
        assert held.path.is_dir()


@pytest.mark.parametrize(
    ("change", "word"),
    [
        pytest.param({"plan_hash": "q" * 64}, "other values of: plan;", id="plan"),
        pytest.param({"key": bytes(32), "key_id": "K-2"}, "other values of: site key;", id="key"),
        pytest.param(
            {"versions": {"safecheck": "0.2", "numpy": "2.1"}},
            "version of numpy (none then, 2.1 now), version of safecheck (0.1 then, 0.2 now);",
            id="versions",
        ),
    ],
)
def test_resuming_another_run_says_what_differs(tmp_path: Path, change: dict[str, object], word: str) -> None:
    work_of(tmp_path, study())
    with pytest.raises(ResumeMismatch, match=re.escape(word)):
        begin(tmp_path, manifest_of(study(), **change))


def test_resuming_with_other_inputs_is_refused_but_their_order_does_not_matter(tmp_path: Path) -> None:
    work_of(tmp_path, study())
    work_of(tmp_path, study()[::-1])
    with pytest.raises(ResumeMismatch, match="other values of: inputs;"):
        begin(tmp_path, manifest_of([*study(), instance("one-more")]))


@pytest.mark.parametrize(
    ("name", "word"),
    [pytest.param("holiday.jpg", "not empty", id="foreign"), pytest.param("seal.json", "finished", id="finished")],
)
def test_a_folder_that_holds_anything_else_is_not_touched(tmp_path: Path, name: str, word: str) -> None:
    (tmp_path / name).touch()
    with pytest.raises(UsageError, match=word):
        begin(tmp_path, manifest_of(study()))
    assert [path.name for path in tmp_path.iterdir()] == [name]


def test_a_path_that_is_a_file_is_refused_without_naming_it(tmp_path: Path) -> None:
    (tmp_path / "Doe_Jane").touch()
    with pytest.raises(UsageError, match="cannot be used") as caught:
        begin(tmp_path / "Doe_Jane", manifest_of(study()))
    assert "Doe" not in str(caught.value)


def test_a_manifest_that_cannot_be_read_stops_the_run(tmp_path: Path) -> None:
    work = work_of(tmp_path, study())
    (work / "manifest.json").write_text("{")
    with pytest.raises(DossierError, match="manifest"):
        begin(tmp_path, manifest_of(study()))


def test_a_finished_run_leaves_no_work_folder(tmp_path: Path) -> None:
    with begin(tmp_path, manifest_of(study())) as held:
        (held.path / "shards" / "one").mkdir(parents=True)
        (held.path / "stray").touch()
        held.finish()
    assert not list(tmp_path.iterdir())


def test_the_manifest_holds_no_uid_and_no_path(tmp_path: Path) -> None:
    work = work_of(tmp_path, [instance("a", folder="Doe_Jane")])
    text = (work / "manifest.json").read_text()
    assert "1.2.3" not in text
    assert "Doe" not in text
