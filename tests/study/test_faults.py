"""Each wrong file is answered with one line for each fault: where, what came, what is allowed."""

import pytest

from tests.study.files import SHARES, lines, written

NUMBER_OR_TABLE = 'a number{}, or a table like {{distribution = "normal", mean = 0, sd = 1}}'
KINDS = (
    "normal, student_t, cauchy, gamma, lognormal, half_normal, exponential, uniform, beta, histogram, "
    "point, mixture"
)


def normal(**keys: str) -> str:
    every = {"distribution": '"normal"', "mean": "1.8", "sd": "1.5", **keys}
    return "{" + ", ".join(f"{key} = {value}" for key, value in every.items()) + "}"


def table(kind: str, keys: str) -> str:
    return f'{{distribution = "{kind}", {keys}}}'


TYPES = [
    ({"study__title": None}, "[study] title: missing; a short name of the study, required"),
    ({"study__title": '"  "'}, '[study] title: empty (got "  "); a short name of the study'),
    ({"study__title": "3"}, "[study] title: not a text (got 3); a text in quotes"),
    ({"effect__null": '"0"'}, '[effect] null: not a number (got "0"); a number, without quotes'),
    ({"effect__null": "true"}, "[effect] null: not a number (got true); a number"),
    ({"effect__null": "nan"}, "[effect] null: not a finite number (got nan); a finite number"),
    (
        {"effect__planning_value": "-inf"},
        "[effect] planning_value: not a finite number (got -inf); a finite number",
    ),
    ({"effect__null": "2024-05-01"}, "[effect] null: not a number (got 2024-05-01); a number"),
    (
        {"effect__favourable": '"hihger"'},
        (
            '[effect] favourable: not one of the choices (got "hihger"); '
            'did you mean higher? allowed: "higher", "lower", "either"'
        ),
    ),
    (
        {"effect__favourable": "true"},
        '[effect] favourable: not one of the choices (got true); allowed: "higher", "lower", "either"',
    ),
    ({"design__n_per_group": "40.0"}, "[design] n_per_group: not a whole number (got 40.0); a whole number"),
    ({"design__n_per_group": "true"}, "[design] n_per_group: not a whole number (got true); a whole number"),
    (
        {"design__n_per_group": '"40"'},
        '[design] n_per_group: not a whole number (got "40"); a whole number, without quotes',
    ),
    (
        {"design__n_per_group": "1"},
        "[design] n_per_group: value not allowed (got 1); a whole number of at least 2",
    ),
    (
        {"design__n_per_group": "10" + "0" * 30},
        "[design] n_per_group: value not allowed (got 10"
        + "0" * 30
        + "); a whole number of at most 1000000000",
    ),
    (
        {"design__analysis": '"T"'},
        'not one of the choices (got "T"); did you mean t? allowed: "t", "z", "welch"',
    ),
    (
        {"design__sd": "true"},
        "[design] sd: neither a number nor a distribution (got true); " + NUMBER_OR_TABLE.format(""),
    ),
    (
        {"design__sd": '"5"'},
        '[design] sd: neither a number nor a distribution (got "5"); '
        + NUMBER_OR_TABLE.format(", without quotes"),
    ),
    (
        {"design__sd": "[5]"},
        "[design] sd: neither a number nor a distribution (got [5]); " + NUMBER_OR_TABLE.format(""),
    ),
    ({"design__sd": "inf"}, "[design] sd: not a finite number (got inf); a finite number"),
    ({"rule__alpha": "1.5"}, "[rule] alpha: value not allowed (got 1.5); a number between 0 and 1"),
    ({"rule__alpha": "false"}, "[rule] alpha: not a number (got false); a number"),
    (
        {"rule__sides": '"both"'},
        '[rule] sides: not one of the choices (got "both"); allowed: "two", "higher", "lower"',
    ),
    ({"target__max_n": "1e3"}, "[target] max_n: not a whole number (got 1000.0); a whole number"),
    (
        {"target__measure": '"power_quantiles"'},
        '[target] measure: not one of the choices (got "power_quantiles"); allowed: ',
    ),
    (
        {"target__measure": '"asurance"'},
        '[target] measure: not one of the choices (got "asurance"); did you mean assurance? ',
    ),
]
NAMES = [
    (
        {"design__sdd": "5"},
        "[design] sdd: unknown key (got 5); did you mean sd? allowed: family, n_per_group, ",
    ),
    (
        {"prior__probabilty_null": "0.1"},
        "[prior] probabilty_null: unknown key (got 0.1); did you mean probability_null? ",
    ),
    ({"study__author": '"x"'}, '[study] author: unknown key (got "x"); allowed: title, question, field'),
    (
        {"design__family": '"two_meens"'},
        (
            '[design] family: unknown family (got "two_meens"); did you mean two_means? '
            "allowed: estimate, one_mean, paired_means, two_means, one_proportion, two_proportions"
        ),
    ),
    ({"design__family": "7"}, "[design] family: unknown family (got 7); allowed: estimate, "),
    ({"design__family": None}, "[design] family: missing; one of: estimate, "),
    (
        {"rule__type": '"significant"'},
        '[rule] type: unknown rule (got "significant"); did you mean significance? allowed: ',
    ),
    ({"design": None}, "[design]: missing section; what the study will record"),
    ({"prior": None}, "[prior]: missing section; what is believed before the study"),
    ({"prior__control": "0.4"}, "[prior] control: not a key for family two_means (got 0.4); leave it out"),
]
DISTRIBUTIONS = [
    (normal(sd="-1"), "[prior] effect.sd: value not allowed (got -1); a finite number > 0"),
    (normal(mean='"1"'), '[prior] effect.mean: not a number (got "1"); a number, without quotes'),
    (normal(mean="true"), "[prior] effect.mean: not a number (got true); a number"),
    (normal(mean="nan"), "[prior] effect.mean: not a finite number (got nan); a finite number"),
    (
        normal(variance="2"),
        "[prior] effect.variance: unknown key (got 2); allowed: distribution, mean, sd, truncated",
    ),
    (
        '{distribution = "normal", mean = 1}',
        "[prior] effect.sd: missing; standard deviation, > 0; neither variance nor precision",
    ),
    ("{mean = 1, sd = 2}", f"[prior] effect.distribution: missing; one of: {KINDS}"),
    (
        normal(distribution="3"),
        f"[prior] effect.distribution: unknown distribution (got 3); allowed: {KINDS}",
    ),
    (
        normal(distribution='"Normal"'),
        (
            f'[prior] effect.distribution: unknown distribution (got "Normal"); '
            f"did you mean normal? allowed: {KINDS}"
        ),
    ),
    (
        normal(truncated="[3, 2]"),
        "effect.truncated: value not allowed (got [3, 2]); two numbers, the first less than the second",
    ),
    (normal(truncated="[1]"), "[prior] effect.truncated: too short (got [1]); a list of 2"),
    (normal(truncated="[1, 2, 3]"), "[prior] effect.truncated: too long (got [1, 2, 3]); a list of 2"),
    (normal(truncated="5"), "[prior] effect.truncated: not a list (got 5); a list in square brackets"),
    (normal(truncated="[0, nan]"), "[prior] effect.truncated: value not allowed (got [0, nan]); two numbers"),
    (
        normal(truncated="[900, 901]"),
        "effect.truncated: value not allowed (got [900, 901]); a range with mass at least 1e-12",
    ),
    (
        table("point", "value = 1, truncated = [0, 2]"),
        "[prior] effect.truncated: unknown key (got [0, 2]); allowed: ",
    ),
    (
        table("uniform", "low = 2, high = 1"),
        "[prior] effect.low: value not allowed (got 2); less than high = 1",
    ),
    (table("beta", "mean = 0.3"), "[prior] effect.size: missing; either a and b, or mean and size"),
    (
        table("histogram", "edges = [0, 1, 2], weights = [1]"),
        "[prior] effect.weights: value not allowed (got [1]); one number fewer than edges",
    ),
    (
        table("mixture", f"components = [1.0, {normal(sd='0')}], weights = [0.5, 0.5]"),
        "[prior] effect.components[1].sd: value not allowed (got 0); a finite number > 0",
    ),
    (
        table("mixture", f"components = [1.0, {normal()}], weights = [0.5, 0.6]"),
        "[prior] effect.weights: value not allowed (got [0.5, 0.6]); sum 1, not 1.1",
    ),
    (
        table("mixture", f"components = [{normal(distribution=chr(34) + 'norml' + chr(34))}], weights = [1]"),
        '[prior] effect.components[0].distribution: unknown distribution (got "norml"); did you mean ',
    ),
    (
        table("mixture", 'components = [1], weights = ["1"]'),
        '[prior] effect.weights[0]: not a number (got "1")',
    ),
    (table("mixture", "components = 1, weights = [1]"), "[prior] effect.components: not a list (got 1)"),
]
TOGETHER = [
    ({"design__sd": "-5"}, "[design] sd: not a possible value (got -5); values above 0"),
    (
        {"design__sd": normal()},
        "[design] sd: 0.12 of its probability lies on impossible values (got normal, mean 1.8, sd 1.5); ",
    ),
    (
        {"design__sd": '{distribution = "half_normal", scale = 5e-324}'},
        (
            "[design] sd: too extreme to compute with (got half-normal, scale 4.94066e-324); "
            "numbers of an ordinary size"
        ),
    ),
    ({"design__sd": None}, "[design] sd: sds do not fit; give sd, or sd_treatment and sd_control"),
    (
        {"design__n_control": "9"},
        "[design] n_per_group: sizes do not fit (got 40); give n_per_group, or n_treatment and n_control",
    ),
    (
        {"effect__smallest_relevant": "-1"},
        "[effect] smallest_relevant: not a distance from the null (got -1); a distance above 0",
    ),
    (
        {"prior__effect": None},
        "[prior] effect: missing; give the prior on the effect or on the treated arm, one of them",
    ),
    (
        {"prior__treatment": "1"},
        "[prior] effect: given together with [prior] treatment; give the prior on the effect or ",
    ),
    ({"prior__probability_null": "1.2"}, "[prior] probability_null: not a probability (got 1.2); 0 to 1"),
    (
        {"prior__effect": None, "prior__treatment": "1"},
        "[prior] treatment: not for family two_means; give the prior on [prior] effect",
    ),
    (
        {"target__at_most": "0.9"},
        "[target] at_least: sizes need one bound; give at_least or at_most, one of them",
    ),
    (
        {"target__at_least": "80"},
        "[target] at_least: not a possible value (got 80); a probability, 0 to 1 (0.8, not 80)",
    ),
    ({"target__max_n": "1"}, "[target] max_n: too small (got 1); at least 2"),
]
ARMS = [
    (
        {"design__control": None},
        "[design] control: missing; the control group's proportion: number or distribution",
    ),
    (
        {"prior__control": "0.3"},
        "[prior] control: given twice (got 0.3); give it here or in [design], not in both",
    ),
    (
        {"design__control": None, "prior__control": "1.3"},
        "[prior] control: not a possible value (got 1.3); values strictly between 0 and 1",
    ),
    (
        {"design__control": None, "prior__control": '"x"'},
        '[prior] control: neither a number nor a distribution (got "x"); ',
    ),
    (
        {"design__control": None, "prior__control": table("beta", "a = 1, b = -1")},
        "[prior] control.b: value not allowed (got -1); ",
    ),
    (
        {"prior__effect": "0.7"},
        "[prior] effect: not a possible value (got 0.7); possible values are -0.4 to 0.6",
    ),
    (
        {"prior__effect": None, "prior__treatment": "1.2"},
        "[prior] treatment: not a possible value (got 1.2); possible values are 0 to 1",
    ),
    ({"effect__null": "3"}, "[effect] null: not a possible effect (got 3); strictly between -0.4 and 0.6"),
]


@pytest.mark.parametrize(("changes", "line"), TYPES + NAMES + TOGETHER, ids=lambda value: str(value)[:70])
def test_one_wrong_key_gives_one_line(changes: dict[str, str], line: str) -> None:
    found = lines(written(**changes))
    assert len(found) == 1
    assert line in found[0]


@pytest.mark.parametrize(("effect", "line"), DISTRIBUTIONS, ids=lambda value: str(value)[:70])
def test_one_wrong_distribution_gives_one_line(effect: str, line: str) -> None:
    found = lines(written(prior__effect=effect))
    assert len(found) == 1
    assert line in found[0]


@pytest.mark.parametrize(("changes", "line"), ARMS, ids=lambda value: str(value)[:70])
def test_beliefs_on_two_arms(changes: dict[str, str], line: str) -> None:
    found = lines(written(SHARES, **changes))
    assert len(found) == 1
    assert line in found[0]


def test_faults_of_all_sections_and_kinds_come_together_in_order() -> None:
    text = written(
        design__sd=table(
            "mixture", f"components = [{normal(sd='-1')}, {normal(sd='0', mean='true')}], weights = [1, 0]"
        ),
        design__n_per_group="4.5",
        rule__alpha="2",
        study__title="1",
        target__at_leest="0.8",
        prior__effect=normal(sd="0"),
        effect__null='"0"',
    )
    assert lines("[extra]\n" + text) == [
        "[extra]: unknown section; allowed: study, effect, design, prior, rule, target",
        "[study] title: not a text (got 1); a text in quotes",
        '[effect] null: not a number (got "0"); a number, without quotes',
        "[design] n_per_group: not a whole number (got 4.5); a whole number",
        "[design] sd.components[0].sd: value not allowed (got -1); a finite number > 0",
        "[design] sd.components[1].mean: not a number (got true); a number",
        "[prior] effect.sd: value not allowed (got 0); a finite number > 0",
        "[rule] alpha: value not allowed (got 2); a number between 0 and 1",
        (
            "[target] at_leest: unknown key (got 0.8); did you mean at_least? "
            "allowed: measure, at_least, at_most, max_n"
        ),
    ]


def test_faults_between_sections_are_found_behind_a_wrong_title_or_target() -> None:
    found = lines(
        written(study__title="1", target__max_n="0.5", prior__probability_null="7", design__sd="-1")
    )
    assert [line.partition(":")[0] for line in found] == [
        "[study] title", "[design] sd", "[prior] probability_null", "[target] max_n",
    ]  # fmt: skip


def test_sections_that_are_not_tables() -> None:
    assert (
        "title: unknown key, outside of any section (got 3); allowed: study, "
        in lines("title = 3\n" + written())[0]
    )
    assert lines("rule = 3\n" + written(rule=None)) == [
        "[rule]: not a table (got 3); a line [rule], once, and its keys below it"
    ]
    assert "[design]: not a table" in lines(written(design=None) + "\n[[design]]\nfamily = 'two_means'")[0]
    assert (
        "[desing]: unknown section; did you mean design? "
        in lines(written().replace("[design]", "[desing]"))[0]
    )
