"""Names: keyed by default, gone in private, kept where asked for; the key lies outside the store."""

import os
from pathlib import Path

import pandas as pd
import pytest

from rtpaudit.columns import TABLES
from rtpaudit.errors import UnusableArguments, UnusableHistory
from rtpaudit.nightly.keys import key_of, usual_place
from rtpaudit.nightly.names import hide_in_report, hide_names
from rtpaudit.nightly.settings import NAMES_KEPT, NAMES_KEYED, PRIVATE
from rtpaudit.nightly.store import Store

KEY = b"k" * 32
SECRETS = ("anna", "01414960123", "f81d4fae@host.example")


def tables() -> dict[str, pd.DataFrame]:
    """One call of somebody, told in every place where he may be told of."""
    cells = {
        "calls": {"caller": "anna", "callee": "192.0.2.9", "call_id": SECRETS[2], "capture": "rec-01414960123-4.pcap"},
        "streams": {"source": "192.0.2.9", "destination": "192.0.2.10", "capture": "rec-01414960123-4.pcap"},
        "findings": {"says": "anna heard nothing from 192.0.2.9 for 4.2 s.", "check_next": "Ask 01414960123."},
        "signalling": {"from": "192.0.2.9:5060", "message": "INVITE", "line": "INVITE sip:anna@192.0.2.9",
                       "call_id": SECRETS[2], "capture": "rec-01414960123-4.pcap"},
        "events": {"digit": "7"},
        "reports": {"reporter": "192.0.2.9"},
        "damage": {"capture": "rec-01414960123-4.pcap", "what": "cut", "lost": "the rest"},
    }  # fmt: skip
    made = {
        name: pd.DataFrame({one.name: pd.array([cells.get(name, {}).get(one.name, pd.NA)], dtype="string")
                            for one in columns if one.kind == "text"}).assign(capture_id="0123456789abcdef")
        for name, columns in TABLES.items()
    }  # fmt: skip
    second = made["calls"].assign(caller="01414960123", callee=pd.NA)
    made["calls"] = pd.concat([made["calls"], second], ignore_index=True)
    return {name: frame.astype("string") for name, frame in made.items()}


def text(frames: dict[str, pd.DataFrame]) -> str:
    return "\n".join(frame.to_csv() for frame in frames.values())


def test_keyed_names_are_nowhere_and_addresses_stay() -> None:
    hidden = hide_names(tables(), NAMES_KEYED, KEY, digits=False)
    for secret in SECRETS:
        assert secret not in text(hidden), secret
    assert hidden["calls"]["callee"][0] == "192.0.2.9"
    assert hidden["streams"]["source"][0] == "192.0.2.9"
    pseudonym = hidden["calls"]["caller"][0]
    assert pseudonym.startswith("party-")
    assert hidden["findings"]["says"][0] == f"{pseudonym} heard nothing from 192.0.2.9 for 4.2 s."
    assert hidden["events"]["digit"][0] == "x"


def test_a_pseudonym_is_the_same_every_night_and_another_with_another_key() -> None:
    of = [hide_names(tables(), NAMES_KEYED, key, digits=False)["calls"]["caller"][0] for key in (KEY, KEY, b"o" * 32)]
    assert of[0] == of[1] != of[2]


def test_private_hides_addresses_and_names_of_captures_too() -> None:
    hidden = hide_names(tables(), PRIVATE, KEY, digits=False)
    for secret in (*SECRETS, "192.0.2"):
        assert secret not in text(hidden), secret
    assert hidden["calls"]["capture"][0] == "capture-01234567"


def test_names_are_kept_where_asked_for_and_digits_by_themselves() -> None:
    kept = hide_names(tables(), NAMES_KEPT, b"", digits=True)
    assert kept["calls"]["caller"][0] == "anna"
    assert kept["events"]["digit"][0] == "7"
    assert hide_names(tables(), NAMES_KEPT, b"", digits=False)["events"]["digit"][0] == "x"


def test_a_report_has_the_pseudonyms_of_the_store() -> None:
    stored = hide_names(tables(), NAMES_KEYED, KEY, digits=False)["calls"]["caller"][0]
    reported, captures = hide_in_report(tables(), ["rec-01414960123-4.pcap"], NAMES_KEYED, KEY)
    assert reported["calls"]["caller"][0] == stored
    assert "01414960123" not in captures[0]
    hidden, captures = hide_in_report(tables(), ["rec-01414960123-4.pcap"], PRIVATE, KEY)
    assert "192.0.2" not in text(hidden) + captures[0]


@pytest.fixture
def store(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Store:
    monkeypatch.setenv("XDG_STATE_HOME", str(tmp_path / "state"))
    return Store.open(tmp_path / "store", create=True)


def test_the_key_is_made_once_outside_the_store_for_its_owner_only(store: Store, tmp_path: Path) -> None:
    key = key_of(store, None)
    path = usual_place(store)
    assert path.is_relative_to(tmp_path / "state")
    assert oct(path.stat().st_mode)[-3:] == "600"
    assert key_of(Store.open(tmp_path / "store"), None) == key
    assert key.hex() not in "".join(one.read_text() for one in (tmp_path / "store").rglob("*") if one.is_file())


def test_a_key_within_the_store_is_refused(store: Store) -> None:
    with pytest.raises(UnusableArguments, match="lies in the store"):
        key_of(store, store.folder / "key")


def test_a_key_that_is_gone_is_told_and_a_new_one_has_to_be_named(store: Store, tmp_path: Path) -> None:
    key = key_of(store, None)
    usual_place(store).unlink()
    with pytest.raises(UnusableHistory, match="is gone"):
        key_of(store, None)
    assert key_of(store, tmp_path / "new.key") != key
    assert len(store.about["keys"]) == 2


def test_another_key_at_the_usual_place_is_refused(store: Store) -> None:
    key_of(store, None)
    usual_place(store).write_text(os.urandom(32).hex())
    with pytest.raises(UnusableHistory, match="is not the key"):
        key_of(store, None)


@pytest.mark.parametrize("content", ["", "abc", "00" * 31, "zz" * 32])
def test_what_is_no_key_is_refused(store: Store, tmp_path: Path, content: str) -> None:
    (tmp_path / "bad.key").write_text(content)
    with pytest.raises(UnusableArguments, match=r"bad\.key"):
        key_of(store, tmp_path / "bad.key")
