"""Every mistake in a family file gives one error with file, line and entry."""

import random

import pytest

from ibpred.errors import FamilyFileError
from ibpred.family.reading import read_family

GOOD = """title = "Box"

[momenta]
loop = ["k"]
external = ["p1", "p2", "p3"]

[kinematics]
invariants = { s = 2, t = 2, m2 = 2 }
equations = [
  "p1^2 = 0",
  "p2^2 = 0",
  "p3^2 = 0",
  "(p1+p2)^2 = s",
  "(p2+p3)^2 = t",
  "(p1+p2+p3)^2 = 0",
]
unit = "s"

[[line]]
momentum = "k"
mass2 = "m2"
[[line]]
momentum = "k+p1"
[[line]]
momentum = "k+p1+p2"
[[line]]
momentum = "k+p1+p2+p3"
"""

# (what is replaced, by what, line of the error, entry, words in the problem)
CASES = {
    "toml syntax": ("[[line]]\nmomentum", "[[line]\nmomentum", 19, "[[line]", ["TOML"]),
    "toml duplicate key": ('mass2 = "m2"', 'momentum = "k"', 21, 'momentum = "k"', ["TOML"]),
    "toml ends early": ('p2+p3"\n', "p2+p3", 27, 'momentum = "k+p1+p2+p3', ["TOML"]),
    "unknown section": ("[kinematics]", "[kinematic]", 7, "[kinematic]", ["kinematic'", "'kinematics'"]),
    "unknown top key": ("title", "titel", 1, 'titel = "Box"', ["'titel'", "did you mean 'title'"]),
    "unknown line key": ("mass2", "mas2", 21, 'mas2 = "m2"', ["'mas2'", "'mass2'", "[line]"]),
    "unknown kinematics key": ("unit =", "units =", 17, 'units = "s"', ["'units'", "'unit'"]),
    "far unknown key": ("unit =", "zzz =", 17, 'zzz = "s"', ["known are invariants, equations"]),
    "unknown momentum": ('"k+p1"', '"k+q1"', 23, 'momentum = "k+q1"', ["'q1'", "did you mean 'p1'"]),
    "unknown in equation": ('"(p1+p2)^2 = s"', '"(p1+p4)^2 = s"', 13, "(p1+p4)^2 = s", ["'p4'", "mean 'p"]),
    "unknown mass": ('"m2"', '"M2"', 21, 'mass2 = "M2"', ["'M2'", "m2"]),
    "bad character": ('"k+p1"', '"k+p1!"', 23, 'momentum = "k+p1!"', ["'!'", "character 5"]),
    "vector plus scalar": ('"k+p1"', '"k+s"', 23, 'momentum = "k+s"', ["vector", "scalar"]),
    "scalar momentum": ('"k+p1"', '"k*p1"', 23, 'momentum = "k*p1"', ["scalar", "expression"]),
    "three momenta": ('"p1^2 = 0"', '"p1^2*p2^2 = 0"', 10, "p1^2*p2^2 = 0", ["more than two momenta"]),
    "third power": ('"p1^2 = 0"', '"p1^3 = 0"', 10, "p1^3 = 0", ["powers 1 and 2"]),
    "high power": ('"m2"\n', '"(s+t+m2)^900"\n', 21, 'mass2 = "(s+t+m2)^900"', ["above 20"]),
    "vector equation": ('"p1^2 = 0"', '"p1 = 0"', 10, "p1 = 0", ["vector"]),
    "no equals sign": ('"p1^2 = 0"', '"p1^2"', 10, "p1^2", ["exactly one '='"]),
    "loop in equation": ('"p1^2 = 0"', '"p1*k = 0"', 10, "p1*k = 0", ["loop momentum k"]),
    "momentum coefficient": ('"k+p1"', '"k+m2/s*p1"', 23, 'momentum = "k+m2/s*p1"', ["numbers"]),
    "no loop momentum": ('"k+p1"', '"p1"', 23, 'momentum = "p1"', ["no loop momentum"]),
    "dependent": ('"k+p1+p2+p3"', '"k+2*p1"', 27, 'momentum = "k+2*p1"', ["D4", "= -D1 + 2*D2 + (m2)"]),
    "repeated line": (
        '"k+p1+p2+p3"',
        '"-k"',
        27,
        'momentum = "-k"',
        ["D4 = D1 + (-m2)", "partial fractions"],
    ),
    "undetermined": ('  "(p2+p3)^2 = t",\n', "", 9, "equations = [", ["p2*p3", "p1*p3"]),
    "contradiction": (
        '"p3^2 = 0",',
        '"p3^2 = 0", "(p1+p3)^2 = t",',
        15,
        "(p1+p2+p3)^2 = 0",
        ["s+2*t = 0", "'p3^2 = 0'", "independent"],
    ),
    "equation dimension": ("^2 = t", "^2 = t^2", 14, "(p2+p3)^2 = t^2", ["mass dimension", "4"]),
    "mass dimension": ('"m2"\n', '"m2^2"\n', 21, 'mass2 = "m2^2"', ["mass dimension 2", "4"]),
    "mixed mass dimension": ('"m2"\n', '"m2+1"\n', 21, 'mass2 = "m2+1"', ["several"]),
    "fractional mass": ('"m2"\n', '"m2^2/s"\n', 21, 'mass2 = "m2^2/s"', ["polynomial"]),
    "mass is a momentum": ('"m2"\n', '"p1^2"\n', 21, 'mass2 = "p1^2"', ["polynomial in the invariants"]),
    "duplicate name": ("m2 = 2", "p1 = 2", 8, None, ["'p1'", "twice", "external momentum", "invariant"]),
    "duplicate momentum": ('"p1", "p2", "p3"', '"p1", "p1", "p3"', 5, None, ["'p1'", "twice"]),
    "reserved d": ("m2 = 2", "d = 2", 8, None, ["'d'", "dimension"]),
    "reserved eps": ('["k"]', '["eps"]', 4, 'loop = ["eps"]', ["'eps'", "regulator"]),
    "no name": ('["k"]', '["k 1"]', 4, 'loop = ["k 1"]', ["'k 1'", "letter"]),
    "unit unknown": ('unit = "s"', 'unit = "u"', 17, 'unit = "u"', ["'u'", "s, t, m2"]),
    "unit not dividing": ("m2 = 2", "m2 = 2, m = 1", 17, 'unit = "s"', ["of m is", "choose another unit"]),
    "unit dimensionless": ("s = 2", "s = 0", None, None, ["mass dimension"]),
    "wrong type title": ('"Box"', "3", 1, "title = 3", ["text in quotes"]),
    "wrong type loop": ('["k"]', '"k"', 4, 'loop = "k"', ["list"]),
    "wrong type invariants": ("{ s = 2, t = 2, m2 = 2 }", '["s"]', 8, 'invariants = ["s"]', ["table"]),
    "wrong type dimension": ("s = 2", 's = "2"', 8, None, ["integer"]),
    "wrong type mass": ('"m2"\n', "2\n", 21, "mass2 = 2", ["text in quotes"]),
    "wrong type cut": ('mass2 = "m2"', 'cut = "yes"', 21, 'cut = "yes"', ["true or false"]),
    "bad dimension": ('"Box"', '"Box"\ndimension = 0', 2, "dimension = 0", ["positive"]),
    "bool as integer": ('"Box"', '"Box"\ndimension = true', 2, "dimension = true", ["integer"]),
    "cut numerator": ('mass2 = "m2"', "cut = true\nnumerator = true", 21, "cut = true", ["numerator"]),
    "mass with expression": ('momentum = "k"', 'expression = "-k^2"', 21, 'mass2 = "m2"', ["expression"]),
    "momentum and expression": ('mass2 = "m2"', 'expression = "k^2"', 21, 'expression = "k^2"', ["not both"]),
    "neither": ('momentum = "k"\nmass2', "mass2", 19, "[[line]]", ["needs a momentum"]),
    "no loops": ('["k"]', "[]", 4, "loop = []", ["no loop momentum"]),
    "legs without graph": ("[[line]]", "[legs]\np1 = 1\n[[line]]", 19, "[legs]", ["edge"]),
    "dimension of a stranger": ('unit = "s"', "dimensions = { q = 0 }", 17, None, ["'q'", "external"]),
}


def error_of(text: str) -> FamilyFileError:
    with pytest.raises(FamilyFileError) as caught:
        read_family(text, "box.toml", "box")
    return caught.value


def error_or_none(text: str) -> FamilyFileError | None:
    try:
        read_family(text, "box.toml", "box")
    except FamilyFileError as error:
        return error
    return None


def test_the_good_file_is_good() -> None:
    assert len(read_family(GOOD, "box.toml", "box").lines) == 4


@pytest.mark.parametrize("name", CASES)
def test_error(name: str) -> None:
    old, new, line, entry, words = CASES[name]
    assert old in GOOD
    error = error_of(GOOD.replace(old, new, 1))
    assert error.file == "box.toml"
    if line is not None:
        assert error.line == line, str(error)
    if entry is not None:
        assert error.entry == entry
    for word in words:
        assert word in error.problem
    assert str(error).startswith(f"box.toml:{error.line}: ")


def test_missing_parts() -> None:
    head, kinematics = GOOD.index("[momenta]"), GOOD.index("[kinematics]")
    lines = GOOD.index("[[line]]")
    for text, word in [
        (GOOD[:head] + GOOD[kinematics:], "[momenta] is missing"),
        (GOOD[:kinematics] + GOOD[lines:], "[kinematics] is missing"),
        (GOOD[:lines], "no lines"),
        ("", "no lines"),
    ]:
        error = error_of(text)
        assert word in error.problem
        assert error.file == "box.toml"


def test_too_many_lines() -> None:
    error = error_of(GOOD + '[[line]]\nmomentum = "k+p3"\n')
    assert error.line == 29
    assert error.entry == 'momentum = "k+p3"'
    assert "5 lines are too many for 4 products" in error.problem


def test_unbounded_loop_momentum() -> None:
    only = GOOD.split("[[line]]")[0] + '[[line]]\nmomentum = "k"\nnumerator = true\n'
    assert "unbounded" in error_of(only).problem
    two = GOOD.replace('["k"]', '["k", "l"]')
    error = error_of(two)
    assert "unbounded" in error.problem
    assert error.line == 19


def test_line_that_is_no_array_of_tables() -> None:
    error = error_of(GOOD.split("[[line]]")[0].replace("title", "line = 3\ntitle"))
    assert "[[line]]" in error.problem
    assert error.line == 1


def test_repeated_entries_are_told_apart() -> None:
    """The second of two equal equations is shown at its own line."""
    error = error_of(GOOD.replace('"p3^2 = 0"', '"p1^2 = 0", "p3 = 0"'))
    assert error.line == 12
    error = error_of(GOOD.replace('"p2^2 = 0",', '"p2 = 0", "p2 = 0",'))
    assert error.line == 11


GRAPH = """[momenta]
external = ["p1", "p2", "p3"]
[kinematics]
invariants = { s = 2, t = 2 }
equations = ["p1^2 = 0", "p2^2 = 0", "p3^2 = 0", "(p1+p2)^2 = s", "(p2+p3)^2 = t", "(p1+p2+p3)^2 = 0"]
[[edge]]
joins = [1, 2]
[[edge]]
joins = [2, 3]
[[edge]]
joins = [3, 4]
[[edge]]
joins = [4, 1]
[legs]
p1 = 1
p2 = 2
p3 = 3
p4 = 4
"""

GRAPH_CASES = {
    "missing leg": ("p3 = 3\n", "", 14, "[legs]", ["conservation", "p3"]),
    "leg at no vertex": ("p3 = 3", "p3 = 7", 17, "p3 = 7", ["vertex 7"]),
    "two dependent legs": ("p4 = 4", "p4 = 4\np5 = 4", 19, "p5 = 4", ["conservation", "p4, p5"]),
    "no dependent leg": (
        "p3 = 3\np4 = 4\n",
        "p3 = 2\n",
        14,
        "[legs]",
        ["conservation", "p1+p2+p3", "missing"],
    ),
    "disconnected": (
        "[3, 4]\n[[edge]]\njoins = [4, 1]",
        "[3, 1]\n[[edge]]\njoins = [7, 8]",
        12,
        "[[edge]]",
        ["pieces", "[7, 8]"],
    ),
    "dangling": ("[legs]", "[[edge]]\njoins = [1, 9]\n[legs]", 14, "[[edge]]", ["dangles", "vertex 9"]),
    "no loop": ("[[edge]]\njoins = [4, 1]\n", "", 6, "[[edge]]", ["no loop"]),
    "bridge": (
        "[legs]\np1 = 1",
        "[[edge]]\njoins = [1, 9]\n[legs]\np1 = 9",
        14,
        "[[edge]]",
        ["no loop momentum"],
    ),
    "loop names": ("[momenta]", '[momenta]\nloop = ["k", "l"]', 2, 'loop = ["k", "l"]', ["1 loop"]),
    "joins of three": ("[1, 2]", "[1, 2, 3]", 7, "joins = [1, 2, 3]", ["two vertices"]),
    "joins of names": ("[1, 2]", '["a", "b"]', 7, 'joins = ["a", "b"]', ["integers"]),
    "no joins": ("joins = [1, 2]\n", "", 6, "[[edge]]", ["joins = [1, 2]"]),
    "unknown edge key": ("joins = [1, 2]", "join = [1, 2]", 7, "join = [1, 2]", ["'join'", "'joins'"]),
    "leg of another type": ("p3 = 3", 'p3 = "3"', 17, 'p3 = "3"', ["integer"]),
    "no numerator": ("[legs]", '[[line]]\nmomentum = "k1+2*p1"\n[legs]', 14, "[[line]]", ["numerator"]),
    "two-valent vertex": (
        "joins = [4, 1]",
        "joins = [4, 5]\n[[edge]]\njoins = [5, 1]",
        14,
        "[[edge]]",
        ["D5 = D4"],
    ),
    "mass": ("joins = [1, 2]", 'joins = [1, 2]\nmass2 = "m2"', 8, 'mass2 = "m2"', ["unknown symbol"]),
}


@pytest.mark.parametrize("name", GRAPH_CASES)
def test_graph_error(name: str) -> None:
    old, new, line, entry, words = GRAPH_CASES[name]
    assert old in GRAPH
    error = error_of(GRAPH.replace(old, new, 1))
    assert (error.line, error.entry) == (line, entry), str(error)
    for word in words:
        assert word in error.problem


@pytest.mark.parametrize("seed", range(40))
@pytest.mark.parametrize("text", [GOOD, GRAPH], ids=["lines", "graph"])
def test_damaged_files_give_a_family_or_an_error_at_a_place(text: str, seed: int) -> None:
    """Ten random edits each: characters and lines lost, doubled or swapped; nothing else escapes."""
    draw = random.Random(seed)
    for _ in range(10):
        damaged = text
        for _ in range(draw.randint(1, 2)):
            kind, at = draw.randint(0, 3), draw.randrange(len(damaged))
            lines = damaged.splitlines(keepends=True)
            row = draw.randrange(len(lines))
            if kind == 0:
                damaged = damaged[:at] + damaged[at + 1 :]
            elif kind == 1:
                damaged = damaged[:at] + draw.choice("kp12sm()+*^/=[]\"',.{} -") + damaged[at:]
            elif kind == 2:
                damaged = "".join(lines[:row] + lines[row + 1 :])
            else:
                damaged = "".join([*lines[:row], lines[draw.randrange(len(lines))], *lines[row:]])
        error = error_or_none(damaged)
        if error is not None:
            assert error.line is None or 1 <= error.line <= damaged.count("\n") + 1
            assert error.problem
