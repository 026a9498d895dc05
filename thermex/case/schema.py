"""Every key of a case file, declared once: the reader works from it and the README table is made from it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Key:
    """One key of a case file."""

    name: str
    kind: str
    """"number", "integer", "text", "texts", "numbers by name", "temperatures", "matrix" or "path"."""
    unit: str = ""
    default: str = ""
    """As written in the documentation; "" when there is none."""
    meaning: str = ""
    low: float = float("-inf")
    high: float = float("inf")
    strict: bool = False
    """Whether the lower bound itself is excluded."""
    allowed: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Table:
    """One table of a case file."""

    path: str
    keys: tuple[Key, ...]
    tables: tuple[str, ...] = ()
    """Names of tables that may stand inside it."""


FORMS: dict[str, tuple[tuple[str, ...], ...]] = {
    "Born": (("B", "n"),),
    "Born-Mayer": (("A", "rho"),),
    "Buckingham": (("A", "rho", "C", "D"),),
    "Lennard-Jones": (("epsilon", "sigma"), ("A", "B")),
    "Mie": (("epsilon", "sigma", "n", "m"),),
    "Morse": (("D", "a", "r0"),),
    "tabulated": ((),),
}

#: Parameters that may be left out, with the value they then have.
OPTIONAL: dict[str, dict[str, float]] = {"Buckingham": {"C": 0.0, "D": 0.0}}

#: Unit, lower bound (excluded) and meaning of each parameter of a pair.
PARAMETERS: dict[str, Key] = {
    "A": Key("A", "number", "eV (Lennard-Jones: eV Å⁶)", "", "amplitude of the exponential", 0.0, strict=True),
    "B": Key("B", "number", "eV Åⁿ (Lennard-Jones: eV Å¹²)", "", "amplitude of the inverse power", 0.0, strict=True),
    "n": Key("n", "number", "", "", "repulsive exponent (Mie: the larger one)", 3.0, 60.0, strict=True),
    "m": Key("m", "number", "", "", "attractive exponent of the Mie form", 3.0, 60.0, strict=True),
    "rho": Key("rho", "number", "Å", "", "range of the exponential", 0.0, 10.0, strict=True),
    "C": Key("C", "number", "eV Å⁶", "0", "coefficient of −1/r⁶"),
    "D": Key("D", "number", "eV Å⁸ (Morse: eV)", "0", "coefficient of −1/r⁸ (Morse: depth)", 0.0),
    "epsilon": Key("epsilon", "number", "eV", "", "depth of the well", 0.0, strict=True),
    "sigma": Key("sigma", "number", "Å", "", "distance of zero energy", 0.0, 50.0, strict=True),
    "a": Key("a", "number", "1/Å", "", "steepness of the Morse form", 0.0, 50.0, strict=True),
    "r0": Key("r0", "number", "Å", "", "distance of the Morse minimum", 0.0, 50.0, strict=True),
}

TABLES: tuple[Table, ...] = (
    Table("", (Key("title", "text", "", '""', "shown on every output"),)),
    Table(
        "crystal",
        (
            Key("prototype", "text", "", "", "structure type; in its place: file"),
            Key("sites", "texts", "", "", "what sits on the sites of the prototype, in its order"),
            Key("a", "number", "Å", "estimated", "where the search for the static minimum starts", 0.5, 200.0),
            Key("b", "number", "Å", "", "the same for b, where it is free", 0.5, 200.0),
            Key("c", "number", "Å", "by the usual c/a", "the same for c, where it is free", 0.5, 200.0),
            Key("inner", "numbers by name", "", "usual values", "start values of free inner coordinates"),
            Key("masses", "numbers by name", "u", "standard atomic weights", "masses by species"),
            Key("file", "path", "", "", "structure file that ASE reads (CIF first)"),
        ),
    ),
    Table(
        "potential",
        (
            Key("published", "text", "", "", "name of a shipped potential; in its place: pairs of your own"),
            Key("charges", "numbers by name", "e", "0", "charge of each ion, shell included"),
            Key(
                "calculator",
                "text",
                "",
                "",
                "a force source of ASE in place of pairs",
                allowed=("effective medium",),
            ),
        ),
        ("pair", "polarisable", "covariance"),
    ),
    Table(
        "potential.pair",
        (
            Key("between", "texts", "", "", "the two species"),
            Key("form", "text", "", "", "functional form", allowed=tuple(FORMS)),
            *PARAMETERS.values(),
            Key(
                "static_distance",
                "number",
                "Å",
                "",
                "nearest-neighbour distance of the static lattice, in place of the amplitude",
                0.5,
                20.0,
            ),
            Key("cutoff", "number", "Å", "none", "only where the potential is defined with one", 1.0, 50.0),
            Key("reach", "text", "", "all", "how far the pair acts", allowed=("all", "nearest")),
            Key("file", "path", "", "", "table of a tabulated form: r (Å), energy (eV)"),
            Key("centres", "texts", "", '["shell", "shell"]', "which centres the force joins"),
        ),
    ),
    Table(
        "potential.polarisable.X",
        (
            Key("shell_charge", "number", "e", "", "charge of the massless shell of ion X", -20.0, 20.0),
            Key("spring_constant", "number", "eV/Å²", "", "harmonic core–shell spring", 0.0, 1e7, strict=True),
            Key("quartic_constant", "number", "eV/Å⁴", "0", "k₄ of k₄ d⁴/24", 0.0),
        ),
    ),
    Table(
        "potential.covariance",
        (
            Key("parameters", "texts", "", "", 'parameter names, such as "Mg-O.rho"'),
            Key("matrix", "matrix", "", "", "their covariance matrix"),
        ),
    ),
    Table(
        "conditions",
        (
            Key("temperature", "temperatures", "K", "", "a list, or { from, to, step }"),
            Key("pressure", "number", "GPa", "0", "hydrostatic pressure", -50.0, 1000.0),
        ),
    ),
    Table(
        "expansion",
        (
            Key(
                "reference_temperature",
                "number",
                "K",
                "293.15",
                "T₀ of ΔL/L₀ and of the mean coefficient",
                0.0,
                1e5,
            ),
        ),
    ),
    Table(
        "accuracy",
        (
            Key("alpha", "number", "", "0.001", "relative numerical error of α at T ≥ 100 K", 1e-6, 0.1),
            Key(
                "anharmonic",
                "text",
                "",
                '"default": leading order where it is tested',
                "correction beyond the quasi-harmonic approximation",
                allowed=("default", "none", "leading order", "sampled"),
            ),
            Key("sampled_error", "number", "", "0.02", "relative statistical error of α aimed at", 1e-4, 0.5),
            Key("seed", "integer", "", "20261", "seed of the sampling", 0, 2**31 - 1),
        ),
    ),
    Table(
        "measured",
        (
            Key("material", "text", "", "", 'a shipped material, such as "MgO"'),
            Key("file", "path", "", "", "your own measured values (CSV)"),
        ),
    ),
)


def table(path: str) -> Table:
    """Return the declaration of one table."""
    return next(t for t in TABLES if t.path == path)


def schema_table() -> str:
    """Return the keys of a case file as a Markdown table, for the README."""
    rows = ["| key | kind | unit | default | meaning |", "|---|---|---|---|---|"]
    for entry in TABLES:
        prefix = f"{entry.path}." if entry.path else ""
        for key in entry.keys:
            choices = f" ({', '.join(key.allowed)})" if key.allowed else ""
            rows.append(f"| `{prefix}{key.name}` | {key.kind} | {key.unit} | {key.default} | {key.meaning}{choices} |")
    return "\n".join(rows)
