"""YAML read like YAML 1.2, with places."""

import pytest
from wellshed.scenarios.messages import InputError
from wellshed.scenarios.yaml_tree import read_tree


@pytest.fixture
def tree_of(tmp_path):
    def read(text):
        file = tmp_path / "a.yaml"
        file.write_text(text, encoding="utf-8")
        return read_tree(file)

    return read


@pytest.mark.parametrize(
    ("written", "read"),
    [
        ("1e-5", 1e-5), ("1.5e3", 1500.0), ("1E+2", 100.0), (".5", 0.5), ("-3", -3), ("010", 10), ("08", 8),
        ("12:30", "12:30"), ("yes", "yes"), ("no", "no"), ("NO", "NO"), ("on", "on"), ("true", True), ("false", False),
        ("2,5", "2,5"), ("1_000", "1_000"), ("0x10", "0x10"), (".nan", ".nan"), (".inf", ".inf"), ("~", None),
        ("", None),
        ("null", None), ("'12'", "12"), ('"true"', "true"), ("2024-05-01", "2024-05-01"), ("1..2", "1..2"),
    ],
)  # fmt: skip
def test_scalars(tree_of, written, read):
    found = tree_of(f"a: {written}\n").data["a"]
    assert found == read
    assert type(found) is type(read)


def test_places_of_keys_and_values(tree_of):
    tree = tree_of("a:\n  b: [1, {c: xyz}]\n")
    assert tree.keys[("a", "b")] == (2, 3)
    assert tree.values[("a", "b", 1, "c")] == (2, 14)
    problem = tree.problem("r", "t", ("a", "b", 1, "c"))
    assert (problem.line, problem.column, problem.width) == (2, 14, 3)


def test_a_path_that_the_file_lacks_shows_at_the_key_of_its_block(tree_of):
    tree = tree_of("a:\n  b: 1\nquux:\n  d: 2\n")
    problem = tree.problem("r", "t", ("quux", "missing"))
    assert (problem.line, problem.column, problem.width) == (3, 1, 4)


def test_duplicate_keys_are_an_error_with_both_lines(tree_of):
    with pytest.raises(InputError) as caught:
        tree_of("a: 1\nb: 2\na: 3\nb: 4\n")
    assert [(p.rule, p.line) for p in caught.value.problems] == [("duplicate-key", 3), ("duplicate-key", 4)]
    assert "the first is in line 1" in caught.value.problems[0].text


def test_anchors_work_but_not_without_end(tree_of):
    assert tree_of("a: &x [1, 2]\nb: *x\n").data["b"] == [1, 2]
    bomb = "a0: &a0 [x, x, x, x, x, x, x, x, x, x]\n"
    bomb += "".join(f"a{n}: &a{n} [{', '.join([f'*a{n - 1}'] * 10)}]\n" for n in range(1, 9))
    with pytest.raises(InputError) as caught:
        tree_of(bomb)
    assert caught.value.problems[0].rule == "anchors"
    with pytest.raises(InputError) as caught:
        tree_of("a: &x [1, *x]\n")
    assert caught.value.problems[0].rule == "anchors"


@pytest.mark.parametrize(
    "text", ["a: [1, 2\n", "a: b: c\n", "\ta: 1\n", "a: !!python/object:os.system x\n- b\n", "[" * 3000]
)
def test_what_is_no_yaml_is_an_input_error(tree_of, text):
    with pytest.raises(InputError) as caught:
        tree_of(text)
    assert caught.value.problems[0].rule == "yaml"


def test_python_tags_make_no_objects(tree_of):
    assert tree_of("a: !!python/object/apply:os.getcwd []\n").data == {"a": []}
