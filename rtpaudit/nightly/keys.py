"""The key of the pseudonyms: kept outside the store, so that the store alone leads back to nobody."""

import hashlib
import os
import secrets
from pathlib import Path

from rtpaudit.errors import UnusableArguments, UnusableHistory
from rtpaudit.nightly.disk import make_folder, write_new
from rtpaudit.nightly.store import Store

LENGTH = 32


def usual_place(store: Store) -> Path:
    """Where the key of a store lies unless the user says otherwise: in the user's folder for state (XDG)."""
    state = os.environ.get("XDG_STATE_HOME") or os.path.join(os.path.expanduser("~"), ".local", "state")
    return Path(state) / "rtpaudit" / f"{store.about['id']}.key"


def key_of(store: Store, given: Path | None) -> bytes:
    """The key of a store, made on first use.

    A key that the store was not written with is taken only where the user names it himself: parties then get other
    pseudonyms from now on.

    Raises
    ------
    UnusableHistory
        If the store was written with another key than the one that is there.
    UnusableArguments
        If the key would lie within the store, or is none.
    """
    path = given or usual_place(store)
    if path.absolute().is_relative_to(store.folder):
        raise UnusableArguments(f"{path}: lies in the store, which is to lead back to nobody; keep the key elsewhere")
    known = list(store.about.get("keys", []))
    if not path.exists() and known and given is None:
        raise UnusableHistory(
            f"{path}: the key of this store is gone; bring it back, or name a new one by --key FILE, from which on "
            "parties have other pseudonyms"
        )
    key = _read(path) if path.exists() else _make(path)
    mark = hashlib.blake2b(store.about["id"].encode(), key=key, digest_size=8).hexdigest()
    if mark not in known:
        if known and given is None:
            raise UnusableHistory(f"{path}: is not the key that this store was written with; bring that one back")
        store.note(keys=[*known, mark])
    return key


def _read(path: Path) -> bytes:
    try:
        key = bytes.fromhex(path.read_text("ascii").strip())
    except (OSError, ValueError) as fault:
        raise UnusableArguments(f"{path}: cannot be read as a key ({fault})") from fault
    if len(key) != LENGTH:
        raise UnusableArguments(f"{path}: holds {len(key)} octets, a key has {LENGTH}")
    return key


def _make(path: Path) -> bytes:
    key = secrets.token_bytes(LENGTH)
    try:
        make_folder(path.parent)
        write_new(path, key.hex().encode() + b"\n")
    except OSError as fault:
        raise UnusableArguments(f"{path}: no key can be kept there ({fault.strerror}); name a file by --key") from fault
    return key
