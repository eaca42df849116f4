"""The part of the rule file's schema that says how vessels were made: standards, preparations, the way back."""

from __future__ import annotations

from spikeward.rules import schema_kinds as kind
from spikeward.rules.schema_shapes import WITH_ITS_DEFAULTS, Block, Field, ListOf, MapOf

ELSEWHERE = ("bench", "name", "column")
"""Where a quantity of the sample comes from, when not from the rule file."""

SOME_CONTENT = ("mass per volume", "amount per volume", "mass per mass", "amount per mass")

SOME_AMOUNT = kind.quantity("mass", "amount", example="0.5 ng")


def content(example: str = "10 mg/L") -> kind.Scalar:
    """The content of a solution; zero is one, of a calibration solution."""
    return kind.quantity(*SOME_CONTENT, example=example, zero=True)


_MASS = kind.quantity("mass", example="10 g")
_EITHER = kind.quantity("volume", "mass", example="10 mL")
_CONTENT = kind.quantity(*SOME_CONTENT, example="10 mg/L")
_DENSITY = kind.quantity("mass per volume", example="1.02 g/mL")

STANDARD = Block((
    Field("contents", MapOf(_CONTENT, "an analyte", "Cd"), "The content of each analyte of a mix.",
          example="{Cd: 10.02 mg/L, Pb: 50.1 mg/L}"),
    Field("analyte", kind.text("an analyte"), "The analyte, where there is only one; with content.", example="Cd",
          hidden=True),
    Field("content", _CONTENT, "Its content.", example="10 mg/L", hidden=True),
    Field("density", _DENSITY, "Its density, where it is weighed and its content is per volume, or the other way.",
          example="1.02 g/mL", hidden=True),
    Field("lot", kind.text(), "The lot.", "", example="EB-24-017"),
    Field("expires", kind.day(), "The last day on which it may be used; compared with the time of measurement.", "",
          example="2027-03-31"),
))  # fmt: skip

SAMPLE = Block((
    Field("mass", kind.quantity("mass", example="0.5 g", words=ELSEWHERE), "The mass of sample.", example="bench"),
    Field("volume", kind.quantity("volume", example="5 mL", words=ELSEWHERE), "The volume of a liquid sample.",
          example="5 mL", hidden=True),
    Field("digest", kind.quantity("volume", example="50 mL", words=ELSEWHERE),
          "The volume to which it was made up; the test solution.", example="50 mL"),
    Field("dry_matter", kind.dry_matter(ELSEWHERE), "The share of dry matter; the result is then of dry matter.",
          example="bench"),
    Field("moisture", kind.dry_matter(ELSEWHERE), "The share of water, instead of dry_matter.", example="12.5 %",
          hidden=True),
    Field("dilution", ListOf(kind.dilution(ELSEWHERE), single=True),
          "The dilution between digest and test solution: 1 + 4, or its factor 5; several in sequence as a list.",
          example="[1 + 4, 10]", hidden=True),
    Field("density", _DENSITY, "The density of a liquid sample, where its result is per mass.", example="1.02 g/mL",
          hidden=True),
))  # fmt: skip

ADDITION = Block((
    Field("standard", kind.text("the name of a standard"),
          "The spiking standard. Left out: the only one of this file.", example="Mix-7"),
    Field("deliveries", kind.word("each", "total"),
          "What the volumes mean: each is added on top of the earlier ones, total is all that a level holds. "
          "Left out: each for successive, else total.", example="total"),
    Field("levels", MapOf(kind.quantity("volume", "mass", example="0.25 mL", zero=True), "a level", "1"),
          "The volume or mass of standard by level.", example="{0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}"),
    Field("amounts", MapOf(kind.quantity("mass", "amount", example="2.5 ug", zero=True), "a level", "1"),
          "Instead of levels: the amount of analyte itself by level, where no standard is named.",
          example="{1: 2.5 ug, 2: 5 ug}", hidden=True),
))  # fmt: skip

ELECTRODE = Block((
    Field("charge", kind.signed_count(), "The charge of the ion that it answers to.", required=True, example="-1"),
    Field("temperature", kind.quantity("temperature", example="22 degC"), "The temperature of the vessels.", "25 degC",
          example="22 degC"),
    Field("slope", kind.signed_quantity("potential", example="-58.6 mV"),
          "Its slope per decade, where it is known. Left out: it is fitted, which takes three vessels.",
          example="-58.6 mV"),
    Field("uncertainty", kind.quantity("potential", example="0.3 mV"),
          "The standard uncertainty of the slope, which then enters as prior knowledge.", example="0.3 mV"),
))  # fmt: skip

INTERNAL_STANDARD = Block((
    Field("for", MapOf(kind.text("an analyte"), "an analyte", "Cd"), "Which internal standard goes with each analyte.",
          required=True, example="{Cd: Rh}"),
    Field("entered", kind.word("in_sample", "per_vessel", "at_constant_content"),
          "Where it came in: into the test solution before aliquots were taken, as an amount into each vessel, or at "
          "the same content in every final solution.", required=True, example="per_vessel"),
    Field("amount", _EITHER,
          "What went into each vessel, where per_vessel differs; a bench file, name or column may say it by level.",
          example="0.1 mL"),
))  # fmt: skip

SPIKE = Block((
    Field("standard", kind.text("the name of a standard"), "The standard.", required=True, example="Mix-7"),
    Field("delivered", kind.quantity("volume", "mass", example="0.1 mL", words=ELSEWHERE),
          "Its volume or mass, or where that comes from.", required=True, example="0.1 mL"),
    Field("added", kind.word("before digestion", "after digestion"), "When.", "before digestion",
          example="before digestion"),
))  # fmt: skip

RECOVERY = Block((
    Field("factor", kind.number("0.94"), "The recovery that results are divided by.", required=True, example="0.94"),
    Field("uncertainty", kind.number("0.03"), "Its standard uncertainty.", required=True, example="0.03"),
))  # fmt: skip

PREPARATION = Block((
    Field("for", MapOf(kind.pattern(), "batch, sample, role or analyte", keys=("batch", "sample", "role", "analyte")),
          "Which series it applies to, as patterns that match the whole word. Left out: all. The first one that "
          "applies counts.", example=r"{batch: 'MD\d+'}"),
    Field("design", kind.word("single", "flasks", "successive", "weighed"),
          "single: one level without and one with an addition. flasks: every level made up to the same final volume. "
          "successive: standard added again and again to one vessel. weighed: vessels made by mass.", required=True,
          example="flasks"),
    Field("response", kind.word("linear", "log", "curve"),
          "linear: a straight line. log: an electrode. curve: a parabola in the content of the vessel, where the "
          "method allows one.", "linear", example="linear"),
    Field("spiked", kind.word("test solution", "sample"),
          "What the standard was added to. sample: before its preparation, each level being a digest of its own.",
          "test solution", example="test solution"),
    Field("aliquot", Block((
        Field("volume", _EITHER, "The same volume at every level; standing alone, a mass as well.", example="10 mL"),
        Field("mass", _MASS, "The same mass at every level.", example="10 g", hidden=True),
        Field("levels", MapOf(_EITHER, "a level", "0"), "A volume or mass for each level.",
              example="{0: 10 mL, 1: 9.5 mL}"),
    ), short="volume"),
          "The test solution that goes into each vessel; {levels: {0: 10 mL, 1: 9.5 mL}} where it differs.",
          WITH_ITS_DEFAULTS,
          example="10 mL"),
    Field("final", Block((
        Field("volume", _EITHER, "The volume; standing alone, a mass as well.", example="25 mL"),
        Field("mass", _MASS, "The mass.", example="25 g", hidden=True),
        Field("levels", MapOf(_EITHER, "a level", "0"), "A volume or mass for each level.",
              example="{0: 25 mL, 1: 25 mL}", hidden=True),
    ), short="volume"),
          "The volume to which each vessel is made up, or its mass.", example="25 mL"),
    Field("additions", ListOf(ADDITION, single=True),
          "The standard additions; a list where several standards go into one series.", (), example="""
standard: Mix-7                           # Left out: the only one of this file.
deliveries: total                         # total is all that a level holds, each adds to the earlier ones.
levels: {0: 0 mL, 1: 0.25 mL, 2: 0.5 mL, 3: 0.75 mL}
# amounts: {1: 2.5 ug, 2: 5 ug}           # Instead: the amount of analyte itself, where no standard is named.
"""),
    Field("level_0", kind.word("as the others", "undiluted"),
          "undiluted: the level without addition was read on the test solution as it is.", "as the others",
          example="as the others"),
    Field("diluent", _EITHER, "A buffer or solvent that every vessel holds.",
          example="50 mL", hidden=True),
    Field("density", _DENSITY, "The density of the test solution, where volumes and masses are mixed.",
          example="1.02 g/mL", hidden=True),
    Field("internal_standard", INTERNAL_STANDARD, "The internal standard.",
          example="{for: {Cd: Rh}, entered: per_vessel, amount: 0.1 mL}", hidden=True),
    Field("electrode", ELECTRODE, "The electrode, with response: log.",
          example="{charge: -1, slope: -58.6 mV, uncertainty: 0.3 mV, temperature: 22 degC}", hidden=True),
    Field("sample", SAMPLE,
          "The way from the test solution back to the sample. A value may be a word for where it comes from: bench (a "
          "bench file), name (of the solution) or column (of the export)."),
    Field("recovery", RECOVERY, "A recovery that results are corrected for, only where it is declared here.",
          example="{factor: 0.94, uncertainty: 0.03}", hidden=True),
    Field("spike", SPIKE, "What samples of role spiked_sample received.",
          example="{standard: Mix-7, delivered: 0.1 mL, added: before digestion}", hidden=True),
    Field("report_in", kind.unit(*SOME_CONTENT, example="mg/kg"), "The unit of the reported result.", "",
          example="mg/kg"),
))  # fmt: skip
