"""The profile: what it refuses and how it says so, and that its documentation is complete and true."""

import pickle
import re
import tomllib
from dataclasses import fields, replace
from pathlib import Path

import pytest

from rtpaudit.errors import UnusableProfile
from rtpaudit.planning import PARAMETERS, CodecValues, PlanningValues
from rtpaudit.profile import PLAYOUT_KINDS, Listening, Network, Playout, Profile
from rtpaudit.route import ROUTE_KEYS, Route

DOCUMENT = Path(__file__).parents[1] / "docs" / "profile.md"


def example() -> str:
    found = re.search(r"```toml\n(.*?)```", DOCUMENT.read_text("utf-8"), re.DOTALL)
    assert found
    return found[1]


def uncommented() -> str:
    return re.sub(r"(?m)^# (?=\[|\w+ = |loss-burst)", "", example())


def refusal(tmp_path: Path, text: str) -> str:
    path = tmp_path / "site.toml"
    path.write_text(text, "utf-8")
    with pytest.raises(UnusableProfile) as fault:
        Profile.read(path)
    said = str(fault.value)
    assert said.startswith(f"{path}: ")
    assert "\n" not in said
    return said.removeprefix(f"{path}: ")


def test_the_documented_example_holds_the_defaults() -> None:
    assert Profile.from_table(tomllib.loads(example())) == Profile()


def test_the_keys_shown_without_a_default_can_be_set() -> None:
    full = Profile.from_table(tomllib.loads(uncommented()))
    assert full.network.delay_ms == 23
    assert full.planning.Bpl == 25.1
    assert full.encodings == {"iLBC": CodecValues(Ie=11, Bpl=32)}
    assert full.limits == {"loss-burst": 80}
    assert full.routes[0].numbers == ("0141", "0150-0159")


def test_the_documented_example_shows_every_key() -> None:
    shown = tomllib.loads(uncommented())
    assert set(shown) == {one.name for one in fields(Profile)}
    for part, kind in {
        "playout": Playout,
        "network": Network,
        "planning": PlanningValues,
        "listening": Listening,
    }.items():
        assert set(shown[part]) == {one.name for one in fields(kind)}, part
    assert set(shown["routes"][0]) == set(ROUTE_KEYS)


def test_the_documented_ranges_are_those_that_hold() -> None:
    shown = dict(re.findall(r"(?m)^(?:# )?(\w+) = .*; (-?[\d.]+ to -?[\d.]+)", example()))
    ranges = {symbol: (row.low, row.high) for symbol, row in PARAMETERS.items()}
    for kind in (Playout, Network, Listening):
        numbers = [one for one in fields(kind) if "permitted" in one.metadata]
        ranges |= {one.name: (one.metadata["permitted"].low, one.metadata["permitted"].high) for one in numbers}
    assert len(shown) > 30
    for name, text in shown.items():
        low, high = text.split(" to ")
        assert (float(low), float(high)) == ranges[name], name


@pytest.mark.parametrize("symbol", PARAMETERS)
def test_a_planning_value_may_stand_at_its_bounds_and_no_further(symbol, tmp_path) -> None:
    row = PARAMETERS[symbol]
    for edge in (row.low, row.high):
        assert getattr(Profile.from_table({"planning": {symbol: edge}}).planning, symbol) == edge
    for beyond in (row.low - 0.01, row.high + 0.01):
        said = refusal(tmp_path, f"[planning]\n{symbol} = {beyond}\n")
        assert said.startswith(f"planning.{symbol} is {beyond}, permitted is {row.low:g} to {row.high:g}")


@pytest.mark.parametrize(("text", "said"), [
    ("[playout]\nnominal_ms = 9000", "playout.nominal_ms is 9000, permitted is 0 to 2000 ms"),
    ("[playout]\nkind = 'elastic'", "playout.kind is 'elastic', permitted are fixed, adaptive, percentile, ideal"),
    ("[playout]\nnominal_ms = '60'", "playout.nominal_ms is '60', which is no number; permitted is 0 to 2000 ms"),
    ("[playout]\nnominal_ms = true", "playout.nominal_ms is True, which is no number; permitted is 0 to 2000 ms"),
    ("[playout]\nnominal_ms = nan", "playout.nominal_ms is nan, permitted is 0 to 2000 ms"),
    ("[playout]\nminimum_ms = 300", "playout.minimum_ms is 300, permitted is up to maximum_ms, which is 200.0"),
    ("[network]\nassumed_ms = 200", "network.assumed_ms is 200, permitted is up to high_ms, which is 150.0"),
    ("[listening]\npeak_dbov = 0", "listening.peak_dbov is 0, permitted is -30 to -1 dBov"),
    ("conceals_loss = 'no'", "conceals_loss is 'no', permitted are true and false"),
    ("playout = 3", "playout is 3, it has to be a table: [playout]"),
    ("[encodings.iLBC]\nBpl = 30", "encodings.iLBC has no Ie, which a rating needs"),
    ("[encodings.iLBC]\nIe = 90", "encodings.iLBC.Ie is 90, permitted is 0 to 40"),
    ("[encodings]\niLBC = 11", "encodings.iLBC is 11, it has to be a table: [encodings.iLBC]"),
    ("[limits]\nloss-burst = 'long'", "limits.loss-burst is 'long', which is no number"),
    ("routes = 'north'", "routes has to be a list of tables, each headed [[routes]]"),
    ("[[routes]]\nvlans = [1]", "routes entry 1 has no name"),
    ("[[routes]]\nname = 'n'", "route 'n' has no rule, it needs one of addresses, numbers, vlans, trunks"),
    ("[[routes]]\nname = 'n'\nvlans = [5000]", "route 'n' has in vlans 5000, permitted is 1 to 4094"),
    ("[[routes]]\nname = 'n'\nvlans = 7", "routes entry 1.vlans is 7, it has to be a list"),
    ("[[routes]]\nname = 'n'\nnumbers = ['9-1']", "whose ends have one length and stand in order"),
    ("[[routes]]\nname = 'n'\nnumbers = [141]", "route 'n' has in numbers 141, permitted is a text such as"),
    ("[[routes]]\nname = 'n'\naddresses = ['192.0.2.1/24']", "permitted is an address or a prefix: "),
    ("[[routes]]\nname = 'n'\naddresses = [7]", "permitted is a text with an address or a prefix"),
    ("[[routes]]\nname = 'n'\ntrunks = ['']", "permitted is a text that is not empty"),
    ("[[routes]]\nname = ' '\nvlans = [1]", "a route is named ' '"),
    ("[[routes]]\nname = 'n'\nvlans = [1]\n[[routes]]\nname = 'n'\nvlans = [2]", "routes has 'n' twice"),
])  # fmt: skip
def test_a_value_that_is_not_permitted_is_refused_by_file_key_and_range(text, said, tmp_path) -> None:
    assert said in refusal(tmp_path, text)


@pytest.mark.parametrize(("text", "said"), [
    ("playuot = 1", "unknown key playuot, known are playout, conceals_loss, network"),
    ("[playout]\nnominl_ms = 60", "unknown key playout.nominl_ms, known are kind, nominal_ms"),
    ("[planning]\nTa_ms = 60", "unknown key planning.Ta_ms, known are SLR, RLR"),
    ("[encodings.opus]\nIe = 5\nloss = 3", "unknown key encodings.opus.loss, known are Ie, Bpl"),
    ("[[routes]]\nname = 'n'\nvlan = [1]", "unknown key routes entry 1.vlan, known are name, addresses"),
])  # fmt: skip
def test_an_unknown_key_is_refused_with_the_known_ones(text, said, tmp_path) -> None:
    assert refusal(tmp_path, text).startswith(said)


@pytest.mark.parametrize("text", ["[playout", "a = 1\na = 2", "x = " + "9" * 5000, "x = " + "[" * 5000])
def test_what_is_no_toml_is_refused(text, tmp_path) -> None:
    assert refusal(tmp_path, text).startswith("is not TOML: ")


def test_octets_that_are_no_text_are_refused(tmp_path) -> None:
    path = tmp_path / "site.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(UnusableProfile, match="is not TOML"):
        Profile.read(path)


def test_a_file_that_is_not_there_is_refused(tmp_path) -> None:
    with pytest.raises(UnusableProfile, match=r"none\.toml: cannot be read: No such file"):
        Profile.read(tmp_path / "none.toml")


def test_an_empty_file_holds_the_defaults(tmp_path) -> None:
    path = tmp_path / "site.toml"
    path.write_text("")
    assert Profile.read(path) == Profile()


def test_a_fixed_buffer_needs_no_bounds_but_an_adaptive_one_does() -> None:
    assert Profile(playout=Playout(nominal_ms=400.0)).playout.nominal_ms == 400.0
    for kind in ("adaptive", "percentile"):
        with pytest.raises(UnusableProfile, match=r"nominal_ms is 400.0, permitted is up to maximum_ms"):
            Profile(playout=Playout(kind=kind, nominal_ms=400.0))


def test_each_kind_of_buffer_can_be_chosen() -> None:
    for kind in PLAYOUT_KINDS:
        assert Profile(playout=Playout(kind=kind)).playout.kind == kind


def test_python_is_refused_what_a_file_is_refused() -> None:
    with pytest.raises(UnusableProfile, match=r"planning\.SLR is 30, permitted is 0 to 18 dB"):
        Profile(planning=PlanningValues(SLR=30))
    with pytest.raises(UnusableProfile, match="4094"):
        Route("n", vlans=(0,))


def test_a_limit_for_a_finding_that_does_not_exist_is_refused() -> None:
    profile = Profile(limits={"loss-brust": 60.0})
    with pytest.raises(UnusableProfile, match=r"unknown key limits\.loss-brust, known are loss-burst"):
        profile.check_limits(["loss-burst"])
    replace(profile, limits={"loss-burst": 60.0}).check_limits(["loss-burst"])


def test_a_profile_survives_the_way_to_a_worker() -> None:
    profile = Profile.from_table(tomllib.loads(uncommented()))
    assert pickle.loads(pickle.dumps(profile)) == profile
