"""Laws of the paired examination."""

from __future__ import annotations

import json
import math
import re
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import Realization, exact, examine, floating
from tests.helpers import exact as as_exact
from tests.strategies import Planted, planted, planted_mild, unstructured

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


def in_tenths(model: Realization) -> Realization:
    """The model with A and B divided by ten, in doubles: its entries are decimals, rounded."""
    A, B, C, D = (m.astype(float) for m in model.matrices())
    return Realization(A / 10, B / 10, C, D)


decimals = st.one_of(
    planted_mild().map(lambda case: in_tenths(case.model)), unstructured().map(in_tenths)
)
rationals = planted(most=1).map(lambda case: case.model)
models = st.one_of(decimals, rationals)


@given(planted_mild())
def test_what_was_written_hides_what_was_planted(case: Planted) -> None:
    """Tenths are no doubles; the reading `written` still finds the planted order and parts."""
    found = examine(in_tenths(case.model))
    assert found.minimal_order["written"] == case.order
    sizes = {part: len(p) - 1 for part, p in found.parts["written"].items()}
    assert sizes == case.dimensions
    assert found.answer.order <= case.order


@given(models)
def test_orders_are_those_of_the_readings(model: Realization) -> None:
    """Every order listed is the one that the exact face finds for that reading."""
    found = examine(model)
    expected = {"given"} if model.kind == "rational" else {"stored", "written", "intended"}
    assert set(found.minimal_order) == set(found.cutoff_ranges) == set(found.routes) == expected
    for reading, order in found.minimal_order.items():
        subject = model if reading == "given" else model.read(reading)
        assert order == exact.minimal(subject).order
        assert set(found.routes[reading].values()) == {order}


@given(models)
def test_agreement_means_what_it_says(model: Realization) -> None:
    """Paths agree when some exact order is the floating one, readings when all are one."""
    found = examine(model)
    orders = list(found.minimal_order.values())
    assert found.floating_order == floating.minimal(model).order
    assert found.paths_agree is (found.floating_order in orders)
    assert found.readings_agree is (len(set(orders)) == 1)


def stairs_of(model: Realization, tolerance: float) -> tuple[tuple[int, ...], ...]:
    """What the floating path finds from the input, and of that from the output."""
    found = examine(model, tolerance=tolerance)
    ranks: dict[str, list[int]] = {"reached": [], "seen": []}
    for decision in found.decisions:
        if decision.rank:
            ranks[decision.where.split(",")[0]].append(decision.rank)
    return tuple(ranks["reached"]), tuple(ranks["seen"])


@given(models, st.floats(0.01, 0.99))
def test_every_cutoff_in_the_range_gives_the_exact_ranks(model: Realization, at: float) -> None:
    """The range is what it is called: inside, the floating path takes the ranks proved."""
    found = examine(model)
    for reading, span in found.cutoff_ranges.items():
        scale = max((decision.scale for decision in found.decisions), default=0.0)
        if span is None or scale == 0.0:  # a model of zeros has no scale, and nothing to decide
            continue
        low, high = span
        assert 0 < low < high
        top = min(high, 1e3 * scale)
        # Strictly inside, on a logarithmic scale.
        cutoff = math.exp(math.log(low) * (1 - at) + math.log(top) * at)
        again = examine(model, tolerance=cutoff / scale, readings=None)
        assert again.floating_order == found.minimal_order[reading]
        for decision in again.decisions:
            assert decision.rank == decision.exact_rank[reading], decision.where


@given(models)
def test_a_cutoff_above_the_range_gives_other_ranks(model: Realization) -> None:
    """At the upper end the smallest singular value that must be kept is dropped."""
    found = examine(model)
    for reading, span in found.cutoff_ranges.items():
        if span is None or math.isinf(span[1]):
            continue
        scale = found.decisions[0].scale  # a finite end is a singular value of some decision
        again = examine(model, tolerance=span[1] * (1 + 1e-9) / scale)
        assert any(d.rank != d.exact_rank[reading] for d in again.decisions)


@given(models)
def test_no_range_comes_with_the_stages_in_conflict(model: Realization) -> None:
    """Exactly where there is no single cutoff, the stages that leave none are named."""
    found = examine(model)
    for reading, span in found.cutoff_ranges.items():
        assert (span is None) == bool(found.conflicts[reading])


def noisy(case: Planted, seed: int, level: float) -> Realization:
    """The planted model in doubles, every entry that is not zero changed a little."""
    rng = np.random.default_rng(seed)
    A, B, C, D = (
        m * (1 + level * rng.uniform(-1, 1, m.shape)) for m in case.model.to_float().matrices()
    )
    return Realization(A, B, C, D)


seeds = st.integers(0, 2**32 - 1)


@given(planted_mild(), seeds, st.sampled_from([1e-15, 1e-13, 1e-11]))
def test_the_nearest_model_is_as_far_away_and_as_small_as_it_says(
    case: Planted, seed: int, level: float
) -> None:
    """Its witness is an exact model of the order stated at the distance stated.

    There is one exactly when the floating path drops what no leading reading hides.
    """
    model = noisy(case, seed, level)
    found = examine(model)
    nearest = found.nearest
    leading = min(found.minimal_order["stored"], found.minimal_order["written"])
    assert (nearest is None) == (found.floating_order >= leading)
    if nearest is None:
        return
    witness = nearest.witness
    assert witness.kind == "rational"
    assert exact.minimal(witness).order == nearest.order < leading
    pairs = list(zip(model.read("stored").matrices()[:3], witness.matrices()[:3], strict=True))
    change = math.sqrt(sum(float(((x - y) ** 2).sum()) for x, y in pairs))
    size = math.sqrt(sum(float((x**2).sum()) for x, _ in pairs))
    assert nearest.relative_distance == pytest.approx(change / size, rel=1e-6, abs=0)
    assert nearest.relative_distance < 1e3 * level


@given(planted_mild(), seeds)
def test_noise_far_below_the_cutoff_does_not_hide_the_planted_order(
    case: Planted, seed: int
) -> None:
    """With entries wrong in the thirteenth digit the floating order is the planted one."""
    assert examine(noisy(case, seed, 1e-13)).floating_order == case.order


@given(models)
def test_the_answer_rests_on_what_it_names(model: Realization) -> None:
    """The order of the answer is that of its basis, and no leading reading has a lower one."""
    found = examine(model)
    answer = found.answer
    if answer.basis == "nearest":
        assert found.nearest is not None
        assert answer.order == found.nearest.order
    else:
        assert answer.basis in found.minimal_order
        assert answer.basis != "intended"
        assert answer.order == found.minimal_order[answer.basis]
    leading = [order for word, order in found.minimal_order.items() if word != "intended"]
    assert answer.order <= min(leading)


@given(models)
def test_modes_are_about_the_answer(model: Realization) -> None:
    """Multiplicities add up to the order of the model, the visible ones to that of the answer."""
    found = examine(model)
    visible = [m for m in found.modes if m.part == "controllable, observable"]
    assert sum(mode.multiplicity for mode in found.modes) == model.order
    assert sum(mode.multiplicity for mode in visible) == found.answer.order
    assert len(found.hidden_modes) + len(visible) == len(found.modes)


@given(models)
def test_words_of_danger_appear_only_where_there_is_some(model: Realization) -> None:
    """Cautions say "unstable" and "marginal" exactly about hidden modes that are."""
    found = examine(model)
    text = " ".join(found.cautions)
    for word in ("unstable", "marginal"):
        assert (re.search(rf"\b{word}\b", text) is not None) == any(
            mode.stability == word for mode in found.hidden_modes
        ), word


@given(models)
def test_the_dictionary_is_json(model: Realization) -> None:
    """to_dict survives JSON without NaN or infinity, and keeps the orders."""
    found = examine(model)
    back = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert back["minimal_order"] == found.minimal_order
    assert back["floating_order"] == found.floating_order
    assert len(back["decisions"]) == len(found.decisions)


@given(models)
def test_the_page_fits_and_says_the_order(model: Realization) -> None:
    """Lines of at most 80 columns, the danger always present."""
    lines = str(examine(model)).splitlines()
    assert all(len(line) <= 80 for line in lines)
    assert any(line.startswith("Danger") for line in lines[:12])


@given(models)
def test_without_time_the_steps_answer_and_say_so(model: Realization) -> None:
    """A budget of zero: nothing is proved, and nothing claims to be."""
    found = examine(model, budget=0)
    if found.minimal_order:
        # Models without states may be answered in no time.
        assert model.order == 0
        return
    assert found.not_done
    assert found.answer.basis == "multiprecision"
    assert found.answer.order == next(iter(found.precision_steps.values())).order
    assert found.paths_agree is False
    assert found.cutoff_ranges == {}
    assert found.routes == {}
    assert all(decision.exact_rank == {} for decision in found.decisions)
    assert found.status in (3, 4)
    assert "exact path" in str(found)
    json.dumps(found.to_dict(), allow_nan=False)


@given(models)
def test_the_digest_is_about_the_exact_path(model: Realization) -> None:
    """Two examinations have one digest, whatever the tolerance."""
    assert examine(model).digest == examine(model, tolerance=1e-3).digest


@given(planted(most=1))
def test_parts_multiply_to_the_polynomial_of_the_model(case: Planted) -> None:
    """A model of doubles: for every reading the four degrees add up to the order."""
    doubles = case.model.to_float()
    for parts in examine(doubles).parts.values():
        assert sum(len(p) - 1 for p in parts.values()) == case.model.order
        assert all(p[0] == 1 and all(type(c) is Fraction for c in p) for p in parts.values())


@given(planted_mild())
def test_hidden_for_a_structural_reason_only_where_the_pattern_says_so(case: Planted) -> None:
    """A mode hidden by the zero pattern stays hidden when the other entries are redrawn."""
    found = examine(case.model)
    structural = sum(m.multiplicity for m in found.hidden_modes if m.why == "structural")
    rng = np.random.default_rng(3)
    redrawn = [
        as_exact(np.where(m != 0, rng.integers(1, 10**6, m.shape), 0))
        for m in case.model.matrices()[:3]
    ]
    assert exact.minimal(Realization(*redrawn)).order <= case.model.order - structural


def test_a_cut_off_state_explains_no_mode_of_another_part() -> None:
    """A mode hidden by its values stays so when a state cut off from everything shares its root.

    The first two states are hidden by value: their sum is not seen, their difference not reached.
    The third is joined to no input and to no output. All three have the root -1.
    """
    alone = Realization([[-1, 0], [0, -1]], [1, 1], [1, -1])
    beside = Realization([[-1, 0, 0], [0, -1, 0], [0, 0, -1]], [1, 1, 0], [1, -1, 0])
    reasons = {str(m.part): m.why for m in examine(alone).hidden_modes}
    assert all(why is not None and why != "structural" for why in reasons.values())
    found = {str(m.part): m.why for m in examine(beside).hidden_modes}
    assert found["uncontrollable, unobservable"] == "structural"
    assert found["controllable, unobservable"] != "structural"
    assert found["uncontrollable, observable"] != "structural"
