"""Reading YAML with line marks: the core schema, lines of keys, and no text that ends in a bare traceback."""

import json
import math

import pytest
import yaml
from hypothesis import given, settings
from hypothesis import strategies as st

from skykiln.config import load_pipeline
from skykiln.config.yaml_lines import plain_value, read_lined_yaml
from skykiln.errors import PipelineError


@pytest.mark.parametrize(
    ("text", "value"),
    # YAML 1.2.2, section 10.3.2, with its own examples: what each plain scalar stands for.
    [
        ("null", None),
        ("~", None),
        ("", None),
        ("true", True),
        ("False", False),
        ("0", 0),
        ("0o7", 7),
        ("0x3A", 58),
        ("-19", -19),
        ("0.", 0.0),
        ("-0.0", 0.0),
        (".5", 0.5),
        ("+12e03", 12000.0),
        ("-2E+05", -200000.0),
        (".inf", math.inf),
        ("-.Inf", -math.inf),
        # Words of YAML 1.2 that YAML 1.1 takes for something else.
        ("on", "on"),
        ("no", "no"),
        ("12:30", "12:30"),
        ("2031-05-01", "2031-05-01"),
        ("1_000", "1_000"),
        ("012", 12),
    ],
)
def test_plain_scalars_follow_the_core_schema(text, value):
    assert plain_value(text) == value
    assert type(plain_value(text)) is type(value)


def test_quoted_scalars_and_keys_are_always_text():
    data = read_lined_yaml("1: '2'\ntrue: \"null\"\n").data
    assert data == {"1": "2", "true": "null"}


def test_lines_of_keys_items_and_aliased_values():
    text = """a:
  b: [1,
      2]

  c: {d: 4,
      e: 5}
copy: &name
  f: 6
again: *name
"""
    lined = read_lined_yaml(text)
    paths = {("a",): 1, ("a", "b"): 2, ("a", "b", 1): 3, ("a", "c", "e"): 6, ("again",): 9, ("again", "f"): 8}
    assert {path: lined.line_of(path) for path in paths} == paths


def test_line_of_a_missing_key_is_that_of_its_parent():
    assert read_lined_yaml("a:\n  b: {c: 1}\n").line_of(("a", "b", "x", 3)) == 2


# Characters that YAML and JSON write alike; YAML 1.1's readers fold the separators of lines and paragraphs.
TEXT = st.text(st.characters(codec="utf-8", exclude_categories=["Cc", "Cn", "Cs", "Zl", "Zp"]), max_size=8)
SCALARS = st.none() | st.booleans() | st.integers(-(2**70), 2**70) | TEXT
DATA = st.recursive(
    SCALARS | st.floats(allow_nan=False, allow_infinity=False),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(TEXT, inner, max_size=4),
    max_leaves=12,
)


@given(DATA)
@settings(max_examples=100, deadline=None)
def test_json_is_read_as_an_independent_reader_reads_it(data):
    text = json.dumps(data, ensure_ascii=False)
    assert read_lined_yaml(text).data == json.loads(text)


PIECES = [
    *("skykiln", "recipes", "sources", "a", "1", "*a", "&a ", ": ", ":\n", "\n", "  ", "- ", "[", "]"),
    *("{", "}", ", ", "'", '"'),
    *("!t ", "!!int ", "| ", "> ", "#", "?", "<<", "---", "...", "%", "\t", "\x07", "é", "~"),
    *(".nan", "1e400", "0x", "@", "`", "\\ud800"),
]
TEXTS = st.lists(st.sampled_from(PIECES), max_size=30).map("".join) | st.text(max_size=60)


def only_pipeline_errors(path):
    """Load a file that may hold anything; every problem must begin with the file and its line."""
    try:
        load_pipeline(path)
    except PipelineError as error:
        assert error.problems
        for problem in error.problems:
            assert problem.isprintable()
            assert problem.startswith(f"{path}:")


@given(TEXTS)
@settings(max_examples=400, deadline=None)
def test_any_text_gives_problems_and_never_a_traceback(tmp_path_factory, text):
    path = tmp_path_factory.getbasetemp() / "any.yaml"
    path.write_bytes(text.encode("utf-8", "surrogatepass"))
    only_pipeline_errors(path)


KEYS = st.sampled_from(
    ["file", "files", "recipe", "layout", "yaw_deg", "extra", "each", "specular", "levels", "roughness"]
    + ["pack", "container", "pixels", "name", "cube_axes", "face_size", "irradiance", "x"]
)
VALUES = st.recursive(
    st.none()
    | st.booleans()
    | st.integers(-5, 20)
    | st.floats()
    | st.sampled_from(["plain", "auto", "linear", "ktx2", "rgba16f", "a[", "../x", "*.none", "é\n"]),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=5),
    max_leaves=15,
)


@given(
    st.fixed_dictionaries(
        {"skykiln": st.just(1) | VALUES},
        optional={
            "recipes": VALUES | st.dictionaries(st.sampled_from(["plain", ""]), VALUES, min_size=1),
            "sources": VALUES | st.dictionaries(st.sampled_from(["sky", "a/b", ".."]), VALUES, min_size=1),
            "brdf": VALUES,
            "gates": VALUES,
            "cube_axes": VALUES,
            "build_dir": VALUES,
        },
    )
)
@settings(max_examples=400, deadline=None)
def test_any_data_gives_problems_and_never_a_traceback(tmp_path_factory, data):
    path = tmp_path_factory.getbasetemp() / "data.yaml"
    path.write_text(yaml.safe_dump(data, allow_unicode=True), encoding="utf-8")
    only_pipeline_errors(path)
