"""Comparing an examination with a recorded one."""

from __future__ import annotations

import copy
import io
import json
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

import realize
from realize import Realization, errors, examine
from realize.cli import main
from realize.examination.against import differences, read_record


def model(last: float = 1.0) -> Realization:
    """Three float states in a chain, the last link of a size to choose."""
    A = np.diag([-1.0, -2.0, -3.0]) + np.diag([1.0, last], -1)
    return Realization(A, [1.0, 0, 0], [1.0, 1.0, 1.0])


def record(of: Realization, **keywords: float) -> dict[str, object]:
    """An examination as it comes back from a file."""
    return json.loads(json.dumps(examine(of, **keywords).to_dict()))


def test_an_examination_is_as_recorded() -> None:
    """Twice the same model: nothing differs, though timings do."""
    assert differences(record(model()), record(model())) == ()


def test_another_rank_is_told_with_its_stage() -> None:
    """A tolerance that drops a state changes the floating order and names the decision."""
    told = [str(each) for each in differences(record(model()), record(model(), tolerance=0.2))]
    assert any(text.startswith("floating_order: was 3, is") for text in told)
    assert any("reached, stage" in text and "rank" in text for text in told)


def test_a_singular_value_that_moved_is_told_in_decades() -> None:
    """One value a hundredfold smaller moved by two decades; half a decade is not worth a line."""
    before = record(model())
    after = copy.deepcopy(before)
    decision = after["decisions"][1]
    decision["smallest_kept"] /= 100
    (found,) = differences(before, after)
    assert found.what == f"{decision['where']}, kept"
    assert found.decades == pytest.approx(-2)
    assert "(-2.0 decades)" in str(found)
    decision["smallest_kept"] *= 100 / 3
    assert differences(before, after) == ()


def test_noise_far_below_the_cutoff_is_not_told() -> None:
    """Dropped noise may move as it likes; near the cutoff it is told."""
    before = record(Realization([[-1.0, 0], [0, -2.0]], [1.0, 0], [1.0, 1.0]))
    (at,) = [k for k, d in enumerate(before["decisions"]) if d["largest_dropped"] is not None]
    before["decisions"][at]["largest_dropped"] = 1e-17
    after = copy.deepcopy(before)
    after["decisions"][at]["largest_dropped"] = 1e-15
    assert differences(before, after) == ()
    after["decisions"][at]["largest_dropped"] = after["decisions"][at]["cutoff"] / 2
    assert [each.what for each in differences(before, after)] == [
        f"{before['decisions'][at]['where']}, dropped"
    ]


def test_a_hidden_mode_that_changed_is_told() -> None:
    """The same order with another hidden mode is a difference."""
    first, second = (Realization([[-1, 0], [0, pole]], [1, 0], [1, 1]) for pole in (-2, -3))
    assert "hidden modes" in {each.what for each in differences(record(first), record(second))}


@pytest.mark.parametrize(
    "text",
    ["", "[]", "{", '{"format": "realize-model", "version": 1}', "[" * 100_000,
     '{"format": "realize-examination", "version": 2}', "3", "null"],
)  # fmt: skip
def test_what_is_no_record_is_refused(text: str) -> None:
    """Not JSON, another format, another version."""
    with pytest.raises(errors.ModelFileError, match="realize examine --json"):
        read_record(io.StringIO(text))


def test_the_command_line_compares(tmp_path: Path) -> None:
    """0 as recorded, 1 when something moved, 2 for what is no record."""
    file, kept = tmp_path / "model.json", tmp_path / "record.json"
    realize.save(model(), file)
    run = CliRunner().invoke
    kept.write_text(run(main, ["examine", str(file), "--json"]).stdout)
    same = run(main, ["examine", str(file), "--against", str(kept)])
    assert (same.exit_code, same.stdout) == (0, "As recorded.\n")
    moved = run(main, ["examine", str(file), "--tolerance", "0.2", "--against", str(kept)])
    assert moved.exit_code == 1
    assert "floating_order: was 3, is" in moved.stdout
    listed = run(
        main, ["examine", str(file), "--tolerance", "0.2", "--against", str(kept), "--json"]
    )
    assert any(each["what"] == "floating_order" for each in json.loads(listed.stdout))
    assert run(main, ["examine", str(file), "--against", str(file)]).exit_code == 2
    assert run(main, ["examine", str(file), "--against", str(tmp_path / "no")]).exit_code == 2


def test_a_change_towards_something_unstable_is_status_4(tmp_path: Path) -> None:
    """What moved and now hides a growing mode outranks a mere difference."""
    file, kept = tmp_path / "model.json", tmp_path / "record.json"
    realize.save(model(), file)
    run = CliRunner().invoke
    kept.write_text(run(main, ["examine", str(file), "--json"]).stdout)
    realize.save(Realization([[1, 0], [0, -2]], [0, 1], [1, 1]), file)
    assert run(main, ["examine", str(file), "--against", str(kept)]).exit_code == 4
