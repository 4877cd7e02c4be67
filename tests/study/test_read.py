"""Sound files become the studies they describe."""

import hashlib
import subprocess
import sys
import time
from pathlib import Path

import pytest

from bayesdesign.design import TwoProportions
from bayesdesign.prior import DISTRIBUTIONS, Beta, Distribution, Mixture, Normal, Point, Truncated
from bayesdesign.rule import Significance
from bayesdesign.study.read import load_study, parse_study
from tests.study.files import SHARES, written


def test_the_whole_of_a_study_is_read() -> None:
    study = parse_study(
        written(prior__probability_null="0.25", study__field='"clinical"', effect__planning_value="2")
    )
    assert study.title == "Spray nozzle trial"
    assert study.cautious
    assert study.effect.null == 0
    assert study.effect.planning_value == 2
    assert study.effect.unit == "kg per tree"
    assert study.design.planned_n == 40
    assert study.design.nuisance == {"sd": Point(value=5.0)}
    assert study.prior.variable == Normal(mean=1.8, sd=1.5)
    assert study.prior.probability_null == 0.25
    assert study.rule == Significance(alpha=0.05, sides="two")
    assert study.target is not None
    assert study.target.max_n == 5000


def test_sections_with_defaults_may_be_absent() -> None:
    study = parse_study(written(rule=None, effect=None, target=None))
    assert study.rule == Significance()
    assert study.null == 0
    assert study.favourable == "either"
    assert study.target is None
    assert parse_study(written(rule__type=None, rule__alpha="0.1")).rule == Significance(alpha=0.1)


EXAMPLES = {
    "normal": "mean = 0, sd = 0.1",
    "student_t": "df = 3, location = 0, scale = 1",
    "cauchy": "location = 0, scale = 1",
    "gamma": "shape = 2, rate = 1",
    "lognormal": "median = 1, log_sd = 0.5",
    "half_normal": "scale = 1",
    "exponential": "rate = 1",
    "uniform": "low = 0, high = 2",
    "beta": "a = 2, b = 3",
    "histogram": "edges = [0, 1, 2], weights = [1, 2]",
    "point": "value = 1",
    "mixture": 'components = [0, {distribution = "beta", mean = 0.5, size = 4}], weights = [0.5, 0.5]',
}


@pytest.mark.parametrize("cls", DISTRIBUTIONS, ids=lambda cls: cls.kind)
def test_every_distribution_is_read(cls: type[Distribution]) -> None:
    keys = f'distribution = "{cls.kind}", {EXAMPLES[cls.kind]}'
    belief = parse_study(written(prior__effect=f"{{{keys}}}")).prior.effect
    assert type(belief) is cls
    if cls is not Point:
        cut = parse_study(written(prior__effect=f"{{{keys}, truncated = [0, 0.5]}}")).prior.effect
        assert cut == Truncated(base=belief, low=0.0, high=0.5)


def test_a_range_may_be_open_on_one_side() -> None:
    text = written(prior__effect='{distribution = "normal", mean = 0, sd = 1, truncated = [0, inf]}')
    assert parse_study(text).prior.effect == Truncated(base=Normal(mean=0, sd=1), low=0, high=float("inf"))


def test_numbers_are_points_and_mixtures_hold_mixtures() -> None:
    inner = '{distribution = "mixture", components = [1, 2], weights = [0.5, 0.5]}'
    text = written(
        prior__effect=f'{{distribution = "mixture", components = [{inner}, 3], weights = [0.25, 0.75]}}'
    )
    pair = Mixture(components=(Point(value=1), Point(value=2)), weights=(0.5, 0.5))
    assert parse_study(text).prior.effect == Mixture(components=(pair, Point(value=3)), weights=(0.25, 0.75))
    assert parse_study(written(prior__effect="1")).prior.effect == Point(value=1.0)


@pytest.mark.parametrize("section", ["design", "prior"])
def test_the_control_arm_may_stand_in_either_section(section: str) -> None:
    arms = {
        "prior__treatment": '{distribution = "beta", a = 3, b = 7}',
        "prior__effect": None,
        "design__control": None,
    }
    text = written(
        SHARES, **{**arms, f"{section}__control": '{distribution = "beta", mean = 0.4, size = 50}'}
    )
    study = parse_study(text)
    assert isinstance(study.design, TwoProportions)
    assert study.design.control == Beta(mean=0.4, size=50)
    assert study.prior.treatment == Beta(a=3, b=7)
    assert study.prior.effect is None


def test_a_file_is_identified_by_its_bytes(tmp_path: Path) -> None:
    file = tmp_path / "s.toml"
    data = b"\xef\xbb\xbf" + written().replace("\n", "\r\n").encode()
    file.write_bytes(data)
    study = load_study(file)
    assert study.file == str(file)
    assert study.sha256 == hashlib.sha256(data).hexdigest()
    assert parse_study(written()).sha256 == hashlib.sha256(written().encode()).hexdigest()


def test_loading_is_light(tmp_path: Path) -> None:
    file = tmp_path / "s.toml"
    file.write_text(written())
    code = (
        "import sys; from bayesdesign.study.read import load_study; load_study(sys.argv[1]);"
        "print([m for m in 'scipy.stats pymc pytensor xarray rich arviz'.split() if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code, str(file)], capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "[]"


def test_loading_again_takes_milliseconds() -> None:
    parse_study(written())
    start = time.perf_counter()
    for _ in range(10):
        parse_study(written())
    assert time.perf_counter() - start < 1


def test_only_families_with_a_control_arm_take_one() -> None:
    from bayesdesign.study.schema import takes_control

    assert takes_control("two_proportions")
    assert not takes_control("two_means")
    assert not takes_control("unheard_of")
