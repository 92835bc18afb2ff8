"""Rules in a line and in TOML: names, places in messages, and what is refused."""

import pickle

import pyarrow as pa
import pytest

from geoshape.decide.rules import Rule, parse_rule, parse_rules_toml, refuse_repeated
from geoshape.errors import OptionError

SEEN = "seen > TIMESTAMP('2024-05-31T12:00:00Z')"
NARROW = "narrow: axis_ratio < 0.2 AND area_m2 > 500"


@pytest.mark.parametrize(
    ("text", "name", "condition"),
    [
        (NARROW, "narrow", "axis_ratio < 0.2 AND area_m2 > 500"),
        ("  long and thin :axis_ratio<0.2 ", "long and thin", "axis_ratio<0.2"),
        ("axis_ratio < 0.2", "axis_ratio < 0.2", "axis_ratio < 0.2"),
        ("zone = 'a: b'", "zone = 'a: b'", "zone = 'a: b'"),
        ('"key:of" = 1', '"key:of" = 1', '"key:of" = 1'),
        ("day > DATE('2024-05-31')", "day > DATE('2024-05-31')", "day > DATE('2024-05-31')"),
        (SEEN, SEEN, SEEN),
        (f"late: {SEEN}", "late", SEEN),
        ("No. 5-b: a = 1", "No. 5-b", "a = 1"),
        ("größer: a = 1", "größer", "a = 1"),
    ],
)
def test_rules_in_a_line(text, name, condition):
    rule = parse_rule(text)
    assert (rule.name, rule.condition, rule.message) == (name, condition, "")


def test_columns_that_a_rule_needs():
    rule = parse_rule("x: \"my zone\" = 'a' OR (area_m2 > 1 AND axis_ratio < area_m2) OR CASEI(\"my zone\") = 'b'")
    assert rule.required_columns == ("my zone", "area_m2", "axis_ratio")


def test_unknown_is_not_true():
    rows = pa.table({"axis_ratio": [0.1, 0.1, None, 0.1], "area_m2": [900.0, 100.0, 900.0, None]})
    assert parse_rule(NARROW).evaluate(rows).to_pylist() == [True, False, None, None]


def test_rules_travel_between_processes():
    rule = parse_rule(NARROW)
    assert pickle.loads(pickle.dumps(rule)) == rule


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("narrow: axis_ratio <", "rule 'narrow', at character 13: the condition ends too early; a value or a closing "),
        ("narrow:", "rule 'narrow', there is no condition; write one such as: axis_ratio < 0.2"),
        ("", "rule 'without name', there is no condition; write one such as: axis_ratio < 0.2"),
        (": a = 1", "rule ': a = 1', at character 1: ': a = 1' does not fit here"),
        ("zone = 'a; b'", "rule \"zone = 'a; b'\" needs a name, as its text cannot be one; write name: condition"),
        ("Unusual: a = 1", "rule 'Unusual': the name is kept for features of an unusual score; give it another"),
    ],
)
def test_refusals_in_a_line(text, message):
    with pytest.raises(OptionError) as caught:
        parse_rule(text)
    assert str(caught.value).startswith(message)


@pytest.mark.parametrize(
    ("name", "message"),
    [
        (" ", "a rule has no name; give one that says what it finds, such as narrow"),
        ("a; b", "rule 'a; b': a name takes no semicolon and no line break; give it a short name"),
        ("a\nb", "rule 'a\\nb': a name takes no semicolon and no line break; give it a short name"),
    ],
)
def test_refused_names(name, message):
    with pytest.raises(OptionError) as caught:
        Rule(name, "a = 1")
    assert str(caught.value) == message


def test_a_rule_that_the_columns_cannot_answer():
    schema = pa.schema({"axis_ratio": pa.float64(), "area_m2": pa.string()})
    with pytest.raises(OptionError) as caught:
        parse_rule(NARROW).check(schema)
    assert str(caught.value).startswith("rule 'narrow', at character 22: area_m2 is text and 500 is a number; ")
    with pytest.raises(
        OptionError, match="rule 'flat', at character 1: column 'axis_ration' is not in the layer; did you"
    ):
        parse_rule("flat: axis_ration < 0.2").check(schema)


FILE = """
# Starting points, not limits.
[[rule]]
name = "narrow"
rule = "axis_ratio < 0.2 AND area_m2 > 500"
message = "Long and thin: is it a verge?"

[[rule]]
name = "ragged"
rule = '''
convexity < 0.7
  AND zone <> 'fen'
'''
"""


def test_rules_in_toml():
    narrow, ragged = parse_rules_toml(FILE)
    assert narrow == Rule("narrow", "axis_ratio < 0.2 AND area_m2 > 500", "Long and thin: is it a verge?")
    assert (ragged.name, ragged.message) == ("ragged", "")
    assert ragged.required_columns == ("convexity", "zone")
    assert parse_rules_toml(FILE.encode()) == (narrow, ragged)
    assert parse_rules_toml(b"\xef\xbb\xbf" + FILE.encode()) == (narrow, ragged)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "rules: there is no rule; start each with a line [[rule]], then name = and rule ="),
        ("rule = 5", "rules: there is no rule; start each with a line [[rule]]"),
        ("rule = [1]", "rules: there is no rule; start each with a line [[rule]]"),
        ("[rule]\nname = 'a'\nrule = 'a = 1'", "rules: there is no rule; start each with a line [[rule]]"),
        ("[[rules]]\nname = 'a'", "rules: key 'rules' is not known; each rule is a table that starts with [[rule]]"),
        ("[[rule]]\nname = ", "rules: the text is no TOML: Invalid value (at end of document)"),
        (
            "[[rule]]\nname = 'a'\nname = 'b'",
            "rules: the text is no TOML: Cannot overwrite a value",
        ),
        (b"[[rule]]\nname = '\xff'", "rules: byte 18 is not UTF-8; save the file as UTF-8"),
        ("[[rule]]\nname = 'a'", "rule 'a': key 'rule' is missing; a rule needs a name and a rule"),
        ("[[rule]]\nrule = 'a = 1'", "rule 1 of the file: key 'name' is missing; a rule needs a name and a rule"),
        ("[[rule]]\nname = 'a'\nwhen = 'a = 1'", "rule 'a': key 'when' is not known; a rule has name, rule, message"),
        ("[[rule]]\nname = 3\nrule = 'a = 1'", "rule 1 of the file: name = 3 is no text; put it in quotes"),
        ("[[rule]]\nname = 'a'\nrule = 'x <'", "rule 'a', at character 4: the condition ends too early"),
        (
            "[[rule]]\nname = 'a'\nrule = '''\nx = 1 AND\ny = = 2'''",
            "rule 'a', at line 2, character 5: '= 2' does not fit here",
        ),
        (
            "[[rule]]\nname = 'a'\nrule = 'x = 1'\n[[rule]]\nname = 'A'\nrule = 'x = 2'",
            "rule 'A' is there twice; give each rule a name of its own",
        ),
    ],
)
def test_refusals_in_toml(text, message):
    with pytest.raises(OptionError) as caught:
        parse_rules_toml(text)
    assert str(caught.value).startswith(message)
    assert "\n" not in str(caught.value)


def test_rules_of_different_names_pass():
    refuse_repeated([parse_rule("a: x = 1"), parse_rule("b: x = 1")])
