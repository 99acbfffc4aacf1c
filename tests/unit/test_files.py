"""Model files: round trips, the schema, and documents written by hand."""

from __future__ import annotations

import io
import json
import sys
from fractions import Fraction
from importlib import resources
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.entries import MAX_DIGITS
from realize.errors import LimitError, UnsupportedEntryError
from realize.model import files
from realize.model.files import load, save, to_document
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix

F = Fraction

SCHEMA = json.loads(
    resources.files("realize.model").joinpath("model.schema.json").read_text("utf-8")
)
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)


def written(model: Realization | TransferMatrix) -> str:
    """Return the text that is saved for a model."""
    stream = io.StringIO()
    save(model, stream)
    return stream.getvalue()


def read(document: dict[str, Any] | str) -> Any:
    """Return the model that a document, or the text of one, holds."""
    text = document if isinstance(document, str) else json.dumps(document)
    return load(io.StringIO(text))


def document(**changes: Any) -> dict[str, Any]:
    """Return a small document with some keys changed; None takes a key out."""
    whole: dict[str, Any] = {
        "format": "realize-model",
        "version": 1,
        "realization": {"A": [["0", "1"], ["-1/3", -0.5]], "B": [0, 1], "C": [[1, 0]], "D": [[0]]},
        **changes,
    }
    return {key: value for key, value in whole.items() if value is not None}


entries = st.one_of(
    st.floats(allow_nan=False, allow_infinity=False),
    st.fractions(),
    st.integers(-(10**30), 10**30),
)
exact_entries = st.fractions() | st.integers(-(10**30), 10**30)
periods = st.none() | st.floats(1e-300, 1e300) | st.fractions(F(1, 100), 100)
names = st.text(st.characters(categories=["L", "N", "S", "P"]), min_size=1, max_size=8)


@st.composite
def realizations(draw: st.DrawFn) -> Realization:
    """Realizations of every kind and size, none of the sizes excluded from being zero."""
    n, m, p = (draw(st.integers(0, 3)) for _ in range(3))
    kind = draw(st.sampled_from([entries, exact_entries, st.floats(-9, 9)]))

    def matrix(rows: int, columns: int) -> Any:
        flat = draw(st.lists(kind, min_size=rows * columns, max_size=rows * columns))
        array = np.empty(rows * columns, dtype=object)
        array[:] = flat
        return array.reshape(rows, columns)

    model = Realization(
        matrix(n, n),
        matrix(n, m),
        matrix(p, n),
        matrix(p, m),
        sampling_period=draw(periods),
        state_names=draw(st.none() | st.lists(names, min_size=n, max_size=n, unique=True)),
        input_names=draw(st.none() | st.lists(names, min_size=m, max_size=m, unique=True)),
        output_names=draw(st.none() | st.lists(names, min_size=p, max_size=p, unique=True)),
    )
    return model.to_float() if draw(st.booleans()) else model


@st.composite
def transfer_matrices(draw: st.DrawFn) -> TransferMatrix:
    """Transfer matrices of every kind and size, proper and improper."""
    p, m = draw(st.integers(0, 3)), draw(st.integers(0, 3))
    kind = draw(st.sampled_from([entries, exact_entries, st.floats(-9, 9)]))
    above = [[draw(st.lists(kind, min_size=1, max_size=4)) for _ in range(m)] for _ in range(p)]
    below = [
        [[1, *draw(st.lists(kind, min_size=0, max_size=4))] for _ in range(m)] for _ in range(p)
    ]
    return TransferMatrix(
        above,
        below,
        sampling_period=draw(periods),
        improper=True,
        input_names=draw(st.lists(names, min_size=m, max_size=m, unique=True)),
        output_names=draw(st.none() | st.lists(names, min_size=p, max_size=p, unique=True)),
    )


@given(realizations() | transfer_matrices())
def test_what_is_saved_is_loaded(model: Realization | TransferMatrix) -> None:
    """Every model comes back equal, with the same digest, and the file fits the schema."""
    text = written(model)
    VALIDATOR.validate(json.loads(text))
    again = read(text)
    assert again == model
    assert again.digest == model.digest
    assert text.isascii()


def test_the_schema_is_one() -> None:
    """The schema is valid under its own draft."""
    jsonschema.Draft202012Validator.check_schema(SCHEMA)


def test_points_and_exponents_make_floats() -> None:
    """A number with a point or an exponent is a float; an integer or a text is exact."""
    text = (
        '{"format": "realize-model", "version": 1, "realization": '
        '{"A": [[2, 2.0], [2e0, "2.0"]], "B": [["1e-3"], [0]], "C": [[1, 12345678901234567890]]}}'
    )
    model = read(text)
    assert model.kind == "floating"
    body = to_document(model)["realization"]
    assert body["A"] == [["2", 2.0], [2.0, "2"]]
    assert body["B"] == [["1/1000"], ["0"]]
    assert body["C"] == [["1", "12345678901234567890"]]
    assert body["D"] == [[0.0]]


def test_a_file_of_texts_and_integers_is_rational() -> None:
    """Without a point or exponent outside texts the model is rational, D included."""
    model = read(document(realization={"A": [["1/3"]], "B": [1], "C": [1]}, sampling_period=1))
    assert model.kind == "rational"
    assert model.D.tolist() == [[0]]
    assert model.sampling_period == F(1)


def test_transfer_documents() -> None:
    """Transfer matrices are read nested or flat, with one denominator for all."""
    nested = read(document(realization=None, transfer={"numerators": [[[1], ["1/2"]]],
                                                       "denominators": [1, 3]}))  # fmt: skip
    assert nested == TransferMatrix([[[1], ["1/2"]]], [1, 3])
    flat = read(document(realization=None, transfer={"numerators": [1], "denominators": [1, 2.0]}))
    assert flat == TransferMatrix([1], [1, 2.0])
    improper = document(
        realization=None, transfer={"numerators": [1, 0], "denominators": [1]}, improper=True
    )
    assert not read(improper).is_proper


@pytest.mark.parametrize(("n", "m", "p"), [(0, 2, 3), (0, 0, 2), (0, 2, 0), (2, 0, 1), (2, 1, 0)])
def test_counts_tell_the_shape_of_empty_matrices(n: int, m: int, p: int) -> None:
    """Where a matrix is empty the counts give its shape."""
    body = {
        "A": [[1] * n] * n,
        "B": [[1] * m] * n if n and m else [],
        "C": [[1] * n] * p if n and p else [],
    }
    model = read(document(realization=body, states=n, inputs=m, outputs=p))
    assert (model.order, model.input_count, model.output_count) == (n, m, p)
    assert model.D.shape == (p, m)


def test_counts_are_written_only_where_needed() -> None:
    """A model without empty matrices is written without counts."""
    assert "states" not in to_document(Realization([[1]], [1], [1]))
    assert to_document(Realization([], [], [], [[1]]))["inputs"] == 1


def test_names_and_period_are_kept() -> None:
    """Names and sampling period are read, and default names are not written."""
    model = read(document(state_names=["a", "b"], input_names=["u1"], sampling_period="1/8"))
    assert model.state_names == ("a", "b")
    assert model.sampling_period == F(1, 8)
    again = to_document(model)
    assert again["state_names"] == ["a", "b"]
    assert "input_names" not in again


def test_paths_and_streams(tmp_path: Path) -> None:
    """A path may be a text or a path object; a stream is read and written as it is."""
    model = Realization([["1/3"]], [0.1], [1])
    for target in (tmp_path / "a.json", str(tmp_path / "b.json")):
        save(model, target)
        assert load(target) == model
    with (tmp_path / "c.json").open("w") as stream:
        save(model, stream)
    with (tmp_path / "c.json").open() as stream:
        assert load(stream) == model
    assert (tmp_path / "a.json").read_bytes() == written(model).encode("ascii")


def test_a_missing_file_is_the_systems_error(tmp_path: Path) -> None:
    """A file that does not exist is reported as Python reports it."""
    with pytest.raises(FileNotFoundError):
        load(tmp_path / "none.json")


def test_one_row_on_each_line() -> None:
    """The text is laid out for people and for comparison line by line."""
    lines = written(Realization([[0, 1], ["1/2", -2]], [0, 1], [1, 0])).splitlines()
    assert '      ["1/2", "-2"]' in lines


def test_numbers_of_thousands_of_digits_survive() -> None:
    """Exact numbers longer than the interpreter's digit limit are written and read."""
    model = Realization([[F(3**20_000, 2**20_000)]], [1], [1])
    assert read(written(model)) == model


def test_what_could_not_be_read_is_not_written() -> None:
    """A number with more digits than are read is refused when saving."""
    model = Realization([[10 ** (MAX_DIGITS + 1)]], [1], [1])
    with pytest.raises(LimitError) as caught:
        written(model)
    assert caught.value.limit == MAX_DIGITS


def test_a_failed_save_leaves_the_old_file(tmp_path: Path) -> None:
    """Nothing is opened before the whole text is ready."""
    target = tmp_path / "model.json"
    save(Realization([[1]], [1], [1]), target)
    before = target.read_text()
    with pytest.raises(LimitError):
        save(Realization([[10 ** (MAX_DIGITS + 1)]], [1], [1]), target)
    assert target.read_text() == before


def test_only_models_are_saved_and_only_to_files() -> None:
    """Something that is no model, or no file, is refused by the name of its type."""
    with pytest.raises(UnsupportedEntryError, match="ndarray"):
        save(np.eye(2), sys.stdout)  # type: ignore[arg-type]
    with pytest.raises(UnsupportedEntryError, match="int"):
        save(Realization([[1]], [1], [1]), 3)  # type: ignore[arg-type]
    with pytest.raises(UnsupportedEntryError, match="dict"):
        load({})  # type: ignore[arg-type]


def test_the_limits_are_applied_when_saving(monkeypatch: pytest.MonkeyPatch) -> None:
    """A model that load would refuse for its size is refused by save."""
    model = Realization(np.eye(4), np.eye(4), np.eye(4))
    monkeypatch.setattr(files, "MAX_ENTRIES", 20)
    with pytest.raises(LimitError):
        written(model)
