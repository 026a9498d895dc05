"""Case files: what is right is read, written back and hashed; what is wrong is told, all of it, in clear lines."""

from __future__ import annotations

import copy
import math
import os
import random
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from thermex import InputError, case_from_dict, case_from_published, load_case, published, published_names
from thermex.case.case import Case
from thermex.case.parameters import parameter_names, parameter_value, with_parameter
from thermex.case.writer import case_hash, case_to_dict, case_to_toml

# An invented rock salt: it tests the reading and nothing else.
GOOD: dict[str, Any] = {
    "title": "invented salt",
    "crystal": {"prototype": "rock salt", "sites": ["Na", "Cl"], "a": 5.6, "masses": {"Na": 23.0}},
    "potential": {
        "charges": {"Na": 1.0, "Cl": -1.0},
        "pair": [
            {"between": ["Na", "Cl"], "form": "Born-Mayer", "A": 1250.0, "rho": 0.317},
            {"between": ["Cl", "Cl"], "form": "Buckingham", "A": 3485.0, "rho": 0.317, "C": 72.4, "D": 145.4},
        ],
        "polarisable": {"Cl": {"shell_charge": -2.5, "spring_constant": 30.0}},
    },
    "conditions": {"temperature": {"from": 0, "to": 300, "step": 100}, "pressure": 0.5},
    "expansion": {"reference_temperature": 300},
    "accuracy": {"alpha": 1e-3, "seed": 5},
    "measured": {"material": "NaCl"},
}

Change = Callable[[dict[str, Any]], object]


def faults_of(change: Change) -> tuple[str, ...]:
    """Return the lines told about a good case after one change."""
    content = copy.deepcopy(GOOD)
    change(content)
    with pytest.raises(InputError) as caught:
        case_from_dict(content, source="mine.toml")
    assert caught.value.exit_status == 2
    assert all(line.startswith("mine.toml: ") and "\n" not in line and len(line) < 600 for line in caught.value.faults)
    return caught.value.faults


def pair(content: dict[str, Any], **keys: Any) -> None:
    content["potential"]["pair"][0].update(keys)


WRONG: dict[str, tuple[Change, str, str]] = {
    "unknown table": (lambda c: c.update(crytal={}), "crytal: is not a known key", 'did you mean "crystal"?'),
    "unknown key": (lambda c: c["crystal"].update(prototyp="fcc"), "crystal.prototyp", 'did you mean "prototype"?'),
    "unknown key of a pair": (lambda c: pair(c, rh=1.0), "potential.pair[0].rh", "rho"),
    "no crystal": (lambda c: c.pop("crystal"), "crystal: is missing", "prototype"),
    "no potential": (lambda c: c.pop("potential"), "potential: is missing", "published"),
    "unknown prototype": (
        lambda c: c["crystal"].update(prototype="rocksalty"), 'no structure type "rocksalty"', '"rock salt"'
    ),
    "too few sites": (lambda c: c["crystal"].update(sites=["Na"]), "crystal.sites", ""),
    "no such element": (lambda c: c["crystal"].update(sites=["Na", "Qq"]), "crystal.sites[1]", "chemical symbol"),
    "missing pair": (lambda c: c["potential"]["pair"].pop(0), "nothing keeps Na", "add the pair"),
    "charges": (lambda c: c["potential"]["charges"].update(Na=2.0), "do not cancel", "make their sum zero"),
    "a unit in a number": (lambda c: c["crystal"].update(a="5.6 Å"), 'crystal.a: is "5.6 Å"', "plain number in Å"),
    "a yes where a number belongs": (lambda c: c["crystal"].update(a=True), "crystal.a: is True", "plain number"),
    "a list where a number belongs": (lambda c: pair(c, A=[1.0]), "potential.pair[0].A", "plain number"),
    "NaN": (lambda c: pair(c, A=math.nan), "potential.pair[0].A: is nan", "finite number"),
    "infinite": (lambda c: c["conditions"].update(pressure=math.inf), "conditions.pressure: is inf", "finite"),
    "a huge integer": (lambda c: pair(c, A=10**400), "potential.pair[0].A", "finite"),
    "negative rho": (lambda c: pair(c, rho=-0.3), "potential.pair[0].rho: is -0.3", "above 0"),
    "n too small": (
        lambda c: c["potential"]["pair"].__setitem__(0, {"between": ["Na", "Cl"], "form": "Born", "B": 1.0, "n": 1}),
        "potential.pair[0].n: is 1",
        "above 3",
    ),
    "Mie exponents the wrong way round": (
        lambda c: c["potential"]["pair"].__setitem__(
            0, {"between": ["Na", "Cl"], "form": "Mie", "epsilon": 0.1, "sigma": 2.0, "n": 6, "m": 12}
        ),
        "not above m",
        "n > m",
    ),
    "unknown form": (lambda c: pair(c, form="Born-Meyer"), "potential.pair[0].form", 'did you mean "Born-Mayer"?'),
    "a parameter of another form": (lambda c: pair(c, sigma=2.0), "does not belong to Born-Mayer", "A, rho"),
    "a parameter left out": (lambda c: c["potential"]["pair"][0].pop("rho"), "rho: is missing", "give rho in Å"),
    "amplitude twice": (lambda c: pair(c, static_distance=2.8), "stands beside static_distance", "one of the two"),
    "a pair of one": (lambda c: pair(c, between=["Na"]), "potential.pair[0].between", "two species"),
    "a pair with a stranger": (lambda c: pair(c, between=["Na", "Br"]), 'names "Br"', "Na, Cl"),
    "no such file": (
        lambda c: c["potential"]["pair"].append({"between": ["Na", "Na"], "form": "tabulated", "file": "no.txt"}),
        'no file "no.txt"',
        "relative to the case",
    ),
    "published and own pairs": (lambda c: c["potential"].update(published="TF64 NaCl"), "beside charges or pairs", ""),
    "no spring": (
        lambda c: c["potential"]["polarisable"]["Cl"].pop("spring_constant"), "spring_constant: is missing", "eV/Å²"
    ),
    "a spring misspelt": (
        lambda c: c["potential"]["polarisable"].update(
            Cl={"shell_charge": -2.5, "spring_constnt": 30.0, "quartic_constant": 0.0}
        ),
        "spring_constant: is missing",
        "eV/Å²",
    ),
    "a spring of zero": (
        lambda c: c["potential"]["polarisable"]["Cl"].update(spring_constant=0.0), "spring_constant: is 0", "above 0"
    ),
    "no temperatures": (lambda c: c["conditions"].update(temperature=[]), "conditions.temperature", ""),
    "unordered temperatures": (
        lambda c: c["conditions"].update(temperature=[300, 100]), "conditions.temperature", "ascending"
    ),
    "negative temperature": (lambda c: c["conditions"].update(temperature=[-5, 100]), "conditions.temperature", "0"),
    "a step of nothing": (
        lambda c: c["conditions"].update(temperature={"from": 0, "to": 10, "step": 0}), "conditions.temperature", ""
    ),
    "no conditions": (lambda c: c.pop("conditions"), "conditions.temperature: is missing", "in K"),
    "unknown correction": (lambda c: c["accuracy"].update(anharmonic="leading"), "anharmonic", "leading order"),
    "a covariance out of shape": (
        lambda c: c["potential"].update(covariance={"parameters": ["Na-Cl.rho"], "matrix": [[1.0, 2.0]]}),
        "potential.covariance",
        "",
    ),
    "measured without a name": (lambda c: c.update(measured={}), "measured: is empty", "material"),
    "a table where text belongs": (lambda c: c.update(title={"x": 1}), "title: is a table", "text in quotes"),
}  # fmt: skip


@pytest.mark.parametrize("kind", WRONG)
def test_each_fault_is_one_clear_line(kind: str) -> None:
    change, where, fix = WRONG[kind]
    lines = faults_of(change)
    told = [line for line in lines if where in line]
    assert told, lines
    assert fix in told[0], told[0]


def test_all_faults_of_a_file_at_once() -> None:
    def spoil(content: dict[str, Any]) -> None:
        content["crystal"]["a"] = "5.6 Å"
        content["potential"]["pair"][0]["rho"] = -1.0
        content["conditions"]["temperature"] = [300, 100]
        content["expansion"]["reference"] = 3

    lines = faults_of(spoil)
    assert len(lines) >= 4
    for key in ("crystal.a", "potential.pair[0].rho", "conditions.temperature", "expansion.reference"):
        assert any(key in line for line in lines)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"title = ", "not valid TOML"),
        (b"a = 1\na = 2\n", "not valid TOML"),
        (b"\xff\xfe\x00", "not UTF-8"),
        (b"", "crystal: is missing"),
        (b"x = " + b"[" * 5000, "not valid TOML"),
        (b"#" * 1_100_000, "larger than 1 MB"),
    ],
)
def test_files_that_are_no_case(tmp_path: Path, content: bytes, words: str) -> None:
    path = tmp_path / "bad.toml"
    path.write_bytes(content)
    with pytest.raises(InputError) as caught:
        load_case(path)
    assert words in caught.value.faults[0]
    assert "bad.toml" in caught.value.faults[0]


def test_a_missing_file_and_a_folder(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such file"):
        load_case(tmp_path / "none.toml")
    with pytest.raises(InputError, match="is a folder"):
        load_case(tmp_path)


def test_what_is_right_is_read() -> None:
    case = case_from_dict(GOOD, source="mine.toml")
    assert case.title == "invented salt"
    assert case.conditions.temperatures == (0.0, 100.0, 200.0, 300.0)
    assert case.conditions.pressure == 0.5
    assert case.conditions.reference_temperature == 300.0
    assert case.potential.polarisable["Cl"].spring_constant == 30.0
    assert case.potential.polarisable["Cl"].quartic_constant == 0.0
    assert case.accuracy.seed == 5 and case.accuracy.sampled_error == 0.02
    assert case.crystal.masses == {"Na": 23.0}


def test_written_back_as_toml_it_is_the_same_case(tmp_path: Path) -> None:
    case = case_from_dict(GOOD, source="mine.toml")
    path = tmp_path / "again.toml"
    path.write_text(case_to_toml(case), encoding="utf-8")
    again = load_case(path)
    assert case_to_dict(again) == case_to_dict(case)
    assert case_hash(again) == case_hash(case)


def test_the_hash_follows_the_physics() -> None:
    case = case_from_dict(GOOD)
    softer = copy.deepcopy(GOOD)
    softer["potential"]["pair"][0]["rho"] = 0.318
    assert case_hash(case_from_dict(softer)) != case_hash(case)


@pytest.mark.parametrize("name", published_names()[::9])
def test_a_published_set_and_its_pairs_written_out_are_one_case(name: str) -> None:
    by_name = case_from_published(name, (100.0, 300.0))
    written = case_from_dict(case_to_dict(by_name))
    assert case_hash(written) == case_hash(by_name)
    assert published(name).potential.citation
    assert published(name).potential.provenance


def test_an_unknown_published_set_is_told_with_the_nearest() -> None:
    content = {**copy.deepcopy(GOOD), "potential": {"published": "TF64 NaCI"}}
    with pytest.raises(InputError, match="did you mean TF64 NaC"):
        case_from_dict(content)


def test_parameters_by_name() -> None:
    case = case_from_dict(GOOD)
    names = parameter_names(case)
    assert {"Na-Cl.A", "Na-Cl.rho", "Cl-Cl.C", "Cl.shell_charge", "Cl.spring_constant"} <= set(names)
    changed = with_parameter(case, "Na-Cl.rho", 0.32)
    assert parameter_value(changed, "Na-Cl.rho") == 0.32
    assert parameter_value(case, "Na-Cl.rho") == 0.317
    with pytest.raises(InputError):
        parameter_value(case, "Na-Cl.roh")


# ---- garbage ----

PIECES = (
    "nan", "inf", "-inf", "1e999", "-1", "0", "1e-999", "9" * 500, "true", "[]", "{}", '""', '"x"', "[[[]]]",
    "[1, 2, 3]", "{ a = 1 }", '"\\u0000"', '"' + "x" * 5000 + '"', "1979-05-27T07:32:00Z", "0x10", "'''", '"""',
    "\n[crystal]\n", "\n[[potential.pair]]\n", "\n[potential.polarisable.X]\nshell_charge = 1\n", "=", "\t", "#", "\0",
    '"../../../etc/passwd"', '"__import__(\'os\')"', "Na", "Cl", "-", ".", "\u2028", "Å", "[" * 300, "]",
    '\nfile = "."\n', '\nfile = "/dev/zero"\n', "\ncovariance = { parameters = [], matrix = [] }\n",
    "{ from = 0, to = 1e300, step = 1e-300 }", "{ from = nan, to = inf, step = -inf }",
)  # fmt: skip


def garbage(dice: random.Random) -> bytes:
    """Return a good case file spoilt in a few places, or bytes without any sense."""
    if dice.random() < 0.1:
        return dice.randbytes(dice.randrange(0, 2000))
    text = case_to_toml(case_from_dict(GOOD))
    for _ in range(dice.randrange(1, 8)):
        if dice.random() < 0.5 and "= " in text:  # another value for a key
            lines = text.split("\n")
            places = [k for k, line in enumerate(lines) if " = " in line]
            if places:
                k = dice.choice(places)
                lines[k] = lines[k].split(" = ")[0] + " = " + dice.choice(PIECES)
                text = "\n".join(lines)
                continue
        at = dice.randrange(len(text) + 1)
        until = min(len(text), at + dice.randrange(0, 30))
        text = text[:at] + dice.choice((*PIECES, text[at:until] * 2, "")) + text[until:]
    data = bytearray(text.encode("utf-8"))
    if dice.random() < 0.1:
        data.insert(dice.randrange(len(data) + 1), dice.randrange(256))
    return bytes(data)


def nested(dice: random.Random, depth: int = 0) -> object:
    """Return random plain data, dicts with known and unknown keys among it."""
    words = [*GOOD, *GOOD["crystal"], *GOOD["potential"], "between", "form", "A", "rho", "from", "x", "", "\0", "ключ"]
    kinds: list[Callable[[], object]] = [
        lambda: dice.choice([math.nan, math.inf, -1.0, 0, 1, 10**400, True, None, 1.5, b"bytes", 1j, object()]),
        lambda: dice.choice(["", "Na", "rock salt", "Born", "x" * 10_000, "TF64 NaCl", "\ud800", "."]),
        lambda: copy.deepcopy(dice.choice(list(GOOD.values()))),
    ]
    if depth < 6:
        kinds += [
            lambda: [nested(dice, depth + 1) for _ in range(dice.randrange(5))],
            lambda: {dice.choice(words): nested(dice, depth + 1) for _ in range(dice.randrange(6))},
        ]
    return dice.choice(kinds)()


def fuzz_cases(count: int, seed: int) -> tuple[int, int, float]:
    """Give ``count`` bad inputs to the reader; return refused, accepted, and the longest time in s.

    Half are files, half plain dicts. Anything but an InputError or a case is a failure and is raised.
    """
    import tempfile

    dice = random.Random(seed)
    refused = accepted = 0
    longest = 0.0
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "garbage.toml"
        for k in range(count):
            began = time.perf_counter()
            try:
                if k % 2:
                    path.write_bytes(garbage(dice))
                    case = load_case(path)
                else:
                    content = {**copy.deepcopy(GOOD)}
                    for key in dice.sample(list(content), dice.randrange(1, 4)):
                        content[key] = nested(dice)
                    if dice.random() < 0.3:
                        content[dice.choice(["", "x", "\0", "Crystal"])] = nested(dice)
                    case = case_from_dict(content, source="garbage")
            except InputError as error:
                refused += 1
                assert all(0 < len(line) < 3000 and "\n" not in line for line in error.faults)
            else:
                accepted += 1
                assert isinstance(case, Case)
            longest = max(longest, time.perf_counter() - began)
    return refused, accepted, longest


def test_garbage_is_refused_in_words() -> None:
    count = int(os.environ.get("THERMEX_FUZZ", "300"))
    refused, accepted, longest = fuzz_cases(count, 20261)
    print(f"\n{count} bad cases: {refused} refused, {accepted} still sensible, longest {longest:.2f} s")
    assert refused + accepted == count
    assert refused > accepted
    assert longest < 5.0


def test_nothing_in_a_case_is_executed(tmp_path: Path) -> None:
    """A title or a name that is code in some language stays text, and no file appears."""
    content = copy.deepcopy(GOOD)
    content["title"] = "__import__('pathlib').Path('ran').touch()"
    content["crystal"]["sites"] = ["$(touch ran)", "Cl"]
    words = "import json,sys; from thermex import case_from_dict\ntry: case_from_dict(json.loads(sys.argv[1]))\n"
    words += "except Exception as error: print(type(error).__name__)"
    import json

    done = subprocess.run(
        [sys.executable, "-c", words, json.dumps(content)],
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(Path(__file__).resolve().parent.parent)},
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout.strip() == "InputError"
    assert list(tmp_path.iterdir()) == []
