"""Values put for letters reach every part of a setting: graph, detector, efficiency, start and interval."""

from dataclasses import replace

from derive.formula.grammar import parse
from derive.formula.tree import ONE, free_letters, number
from derive.problem.setting import Interval, Letter, Start
from derive.problem.specialise import at_values
from tests.absorber_cases import ETA, of_efficiency
from tests.settings_of_graphs import POSITIVE, watched


def test_interval_and_efficiency() -> None:
    setting = of_efficiency(watched("chain", {"sites": 3}, 0), "eta", ETA, Letter("s", POSITIVE))
    interval, start = Interval(parse("s*tau"), "gamma", parse("s")), Start(((ONE, ((1, ONE),)),))
    setting = replace(setting, interval=interval, start=start)
    found = at_values(setting, {"s": number(2), "eta": parse("3/4")})
    assert found.interval.shape == number(2)
    assert free_letters(found.interval.length) == {"tau"}
    assert found.detectors[0].efficiency == parse("3/4")
    assert [x.name for x in found.letters] == ["g"]
