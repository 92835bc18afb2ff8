"""Flags by rules and by an unusual score: what is written, counted and refused."""

import numpy as np
import pyarrow as pa
import pytest

from geoshape.decide.flag import FLAG_COLUMNS, check_rules, flag, flag_batch, total
from geoshape.decide.outliers import UnusualOptions, fit_unusual
from geoshape.decide.rules import Rule, parse_rule
from geoshape.errors import OptionError

NARROW = Rule("narrow", "axis_ratio < 0.2", "Long and thin.")
LARGE = parse_rule("large: area_m2 > 500")
PARCELS = pa.table({"axis_ratio": [0.1, 0.9, None, 0.1], "area_m2": [900.0, 80.0, 700.0, None]})


def parcels(n_rows, seed=3):
    """Ordinary parcels; the first is twelve standard deviations off, in a direction no single column shows."""
    rng = np.random.default_rng(seed)
    ratio = rng.normal(0.5, 0.05, n_rows)
    convexity = 0.9 * ratio + rng.normal(0.3, 0.005, n_rows)
    ratio[0], convexity[0] = 0.53, 0.9 * 0.53 + 0.3 - 0.06
    return pa.table({"axis_ratio": ratio, "convexity": convexity, "area_m2": np.exp(rng.normal(6, 1, n_rows))})


def test_rules_join_their_names():
    found = flag(PARCELS, [NARROW, LARGE])
    assert found.columns.schema == pa.schema({"flag": pa.bool_(), "flag_reasons": pa.string()})
    assert found.columns["flag"].to_pylist() == [True, False, True, True]
    assert found.columns["flag_reasons"].to_pylist() == ["narrow; large", None, "large", "narrow"]
    counts = [(count.name, count.message, count.n_flagged, count.n_unknown) for count in found.counts]
    assert counts == [("narrow", "Long and thin.", 2, 1), ("large", "", 2, 1)]
    assert found.n_flagged == 3
    assert found.notes == ()


def test_score_stands_beside_the_rules():
    rows = parcels(200)
    found = flag(rows, [LARGE], unusual=UnusualOptions(columns=("axis_ratio", "convexity")))
    assert found.columns.column_names == [column.name for column in FLAG_COLUMNS]
    first = found.columns.slice(0, 1).to_pylist()[0]
    assert first["flag"] is True
    assert first["flag_reasons"].split("; ")[-1] == "unusual"
    assert first["flag_score"] == max(found.columns["flag_score"].to_pylist())
    assert first["flag_note"] is None
    assert [count.name for count in found.counts] == ["large", "unusual"]
    assert found.counts[1].n_unknown == 0
    reasons = found.columns["flag_reasons"].to_pylist()
    is_large = np.array(rows["area_m2"]) > 500
    assert [reason is not None and "large" in reason for reason in reasons] == is_large.tolist()


def test_score_without_rules():
    found = flag(parcels(200), unusual=UnusualOptions(columns=("axis_ratio", "convexity"), level=0.9999))
    assert found.columns["flag"].to_pylist() == [True] + [False] * 199
    assert found.n_flagged == 1


def test_batches_give_what_the_table_gives():
    rows = parcels(150)
    options = UnusualOptions(columns=("axis_ratio", "area_m2"), level=0.9)
    together = flag(rows, [NARROW, LARGE], unusual=options)
    fit = fit_unusual(rows, options)
    pieces = [flag_batch(batch, [NARROW, LARGE], fit) for batch in rows.to_batches(max_chunksize=40)]
    assert len(pieces) == 4
    assert pa.concat_tables([piece.columns for piece in pieces]).combine_chunks() == together.columns.combine_chunks()
    assert total(pieces) == together.counts
    assert sum(piece.n_flagged for piece in pieces) == together.n_flagged


def test_no_rows():
    found = flag(PARCELS.slice(0, 0), [NARROW, LARGE], unusual=UnusualOptions(columns=("axis_ratio",)))
    assert found.columns.num_rows == 0
    assert found.columns.column_names == ["flag", "flag_reasons", "flag_score", "flag_note"]
    assert [count.n_flagged for count in found.counts] == [0, 0, 0]
    assert found.n_flagged == 0


def test_one_row():
    found = flag(PARCELS.slice(0, 1), [NARROW], unusual=UnusualOptions(columns=("axis_ratio",)))
    assert found.columns.to_pylist() == [
        {
            "flag": True,
            "flag_reasons": "narrow",
            "flag_score": None,
            "flag_note": "no score, as 1 complete row is fewer than the 30 that 1 column needs",
        }
    ]
    assert found.notes == ("all features: no score, as 1 complete row is fewer than the 30 that 1 column needs",)


def test_all_null():
    rows = pa.table({"axis_ratio": pa.nulls(30, pa.float64())})
    found = flag(rows, [NARROW], unusual=UnusualOptions())
    assert set(found.columns["flag"].to_pylist()) == {False}
    assert set(found.columns["flag_note"].to_pylist()) == {"no score, as no column is left to judge by"}
    assert [(count.n_flagged, count.n_unknown) for count in found.counts] == [(0, 30), (0, 30)]
    assert found.notes[0] == "all features: axis_ratio left out, as it has no values"


@pytest.mark.parametrize(
    ("rules", "has_score", "message"),
    [
        ([], False, "there is nothing to flag by; give a rule such as 'narrow: axis_ratio < 0.2', or ask for a score"),
        ([NARROW, NARROW], True, "rule 'narrow' is there twice; give each rule a name of its own"),
        (
            [parse_rule("a: areas > 1")],
            False,
            "rule 'a', at character 1: column 'areas' is not in the layer; did you mean area_m2?",
        ),
    ],
)
def test_refusals(rules, has_score, message):
    with pytest.raises(OptionError) as caught:
        check_rules(rules, PARCELS.schema, has_score=has_score)
    assert str(caught.value) == message


def test_flagging_refuses_before_it_reads():
    with pytest.raises(OptionError, match="there is nothing to flag by"):
        flag(PARCELS)


def test_columns_that_flagging_adds():
    assert [column.short_name for column in FLAG_COLUMNS] == ["flag", "flag_why", "flag_score", "flag_note"]
    assert all(column.meaning and len(column.short_name) <= 10 for column in FLAG_COLUMNS)
