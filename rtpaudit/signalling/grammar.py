"""Expressions of SIP, each with its production in RFC 3261 section 25.1 or the clause that says what gear does."""

import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import lru_cache

# Shown wherever a header field is shown: control characters steer a terminal, directional ones rearrange a line.
_UNPRINTABLE = re.compile("[\x00-\x08\x0b-\x1f\x7f-\x9f\u061c\u200e\u200f\u2028-\u202e\u2066-\u2069\ufeff]")

COMPACT_NAMES = {
    # RFC 3261 section 20; o and u RFC 6665, r RFC 3515, b RFC 3892, x RFC 4028, a, d and j RFC 3841, y RFC 8224 (from
    # memory).
    "i": "call-id",
    "m": "contact",
    "e": "content-encoding",
    "l": "content-length",
    "c": "content-type",
    "f": "from",
    "s": "subject",
    "k": "supported",
    "t": "to",
    "v": "via",
    "o": "event",
    "u": "allow-events",
    "r": "refer-to",
    "b": "referred-by",
    "x": "session-expires",
    "a": "accept-contact",
    "d": "request-disposition",
    "j": "reject-contact",
    "y": "identity",
}

# RFC 3261 sections 4 to 17; RFC 3262 PRACK, 3311 UPDATE, 3515 REFER, 6086 INFO, 6665 SUBSCRIBE and NOTIFY,
# 3428 MESSAGE, 3903 PUBLISH (numbers of the last from memory).
METHODS = frozenset(
    {
        *("INVITE", "ACK", "BYE", "CANCEL", "OPTIONS", "REGISTER", "PRACK", "UPDATE", "REFER", "INFO"),
        *("SUBSCRIBE", "NOTIFY", "MESSAGE", "PUBLISH"),
    }
)

MAX_VALUE = 8192
"""Letters of a name and address that are looked at."""

TOKEN = re.compile(r"[A-Za-z0-9.!%*_+`'~-]{1,64}", re.ASCII)
"""token, bounded: method names of kilobytes are no methods"""

_SCHEME = re.compile(r"([A-Za-z][A-Za-z0-9+.-]{0,31}):", re.ASCII)
_QUOTED_STRING = re.compile(r'"((?:[^"\\]|\\.)*)"')
_QUOTED_PAIR = re.compile(r"\\(.)", re.DOTALL)
_ESCAPED = re.compile(r"(?:%[0-9A-Fa-f]{2})+")
_NUMBER_WITH_PARAMETERS = re.compile(r"(\+?[0-9A-Fa-f*#().-]+);")
_TAG = re.compile(r";\s*tag\s*=\s*([^\s;,>]+)", re.IGNORECASE)
_BRANCH = re.compile(r";\s*branch\s*=\s*([^\s;,]+)", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class NameAddress:
    """name-addr or addr-spec with its header parameters: From, To, Contact, Diversion and their like."""

    display_name: str = ""
    uri: str = ""
    parameters: dict[str, str] = field(default_factory=dict)
    """names in lower case; "" where a parameter has no value"""


def printable(text: str) -> str:
    """Text whose control and directional characters are written as escapes."""
    return _UNPRINTABLE.sub(_as_escape, text)


def _as_escape(found: re.Match[str]) -> str:
    code = ord(found[0])
    return f"\\x{code:02x}" if code < 256 else f"\\u{code:04x}"


def header_name(name: str) -> str:
    """Full name of a header field in lower case (RFC 3261 sections 7.3.1 and 7.3.3)."""
    folded = name.strip().lower()
    return COMPACT_NAMES.get(folded, folded)


def split_values(text: str, separator: str = ",") -> Iterator[str]:
    """Parts of a header field value between separators that stand outside quotes and angle brackets (7.3.1)."""
    if '"' not in text and "<" not in text:
        yield from (part.strip() for part in text.split(separator) if part.strip())
        return
    begin, quoted, bracketed, escaped = 0, False, False, False
    for place, letter in enumerate(text):
        if escaped:
            escaped = False
        elif letter == "\\" and quoted:
            escaped = True
        elif letter == '"' and not bracketed:
            quoted = not quoted
        elif letter in "<>" and not quoted:
            bracketed = letter == "<"
        elif letter == separator and not quoted and not bracketed:
            if part := text[begin:place].strip():
                yield part
            begin = place + 1
    if part := text[begin:].strip():
        yield part


def parameters_of(text: str) -> dict[str, str]:
    """Parameters ``;name=value;flag`` (generic-param); the first of a name counts."""
    found: dict[str, str] = {}
    for part in split_values(text, ";"):
        name, _, value = part.partition("=")
        value = value.strip()
        if quoted := _QUOTED_STRING.fullmatch(value):
            value = _QUOTED_PAIR.sub(r"\1", quoted[1])
        found.setdefault(name.strip().lower(), value)
    return found


def name_address(value: str) -> NameAddress:
    """Display name, URI and parameters of one value (name-addr / addr-spec, section 20.10).

    A display name that lacks its quotes, or the closing one, ends at the bracket (RFC 4475, 3.1.2.6 and 3.1.2.15).
    """
    return _name_address(value.strip()[:MAX_VALUE])


@lru_cache(maxsize=4096)
def _name_address(value: str) -> NameAddress:
    quoted = _QUOTED_STRING.match(value)
    display_name, rest = (quoted[1], value[quoted.end() :]) if quoted else ("", value)
    before, bracket, inside = rest.partition("<")
    if not bracket:
        uri, _, tail = rest.partition(";")
        return NameAddress(_unquoted(display_name), uri.strip(), parameters_of(tail))
    uri, _, tail = inside.partition(">")
    if not quoted:
        display_name = before.strip().strip('"').strip()
    return NameAddress(_unquoted(display_name), uri.strip(), parameters_of(tail.partition(";")[2]))


def _unquoted(text: str) -> str:
    return printable(_QUOTED_PAIR.sub(r"\1", text)) if "\\" in text else text


def scheme_of(uri: str) -> str:
    """Scheme in lower case, "" where there is none."""
    found = _SCHEME.match(uri)
    return found[1].lower() if found else ""


def user_of(uri: str) -> str:
    """User part of a SIP URI, number of a tel URI, unescaped once; "" where there is none (section 19.1).

    Parameters of a telephone number inside the user part (``+1-201-555-0123;phone-context=…``) are left out: they are
    no part of what people dial.
    """
    scheme = scheme_of(uri)
    rest = uri[len(scheme) + 1 :]
    if scheme == "tel":
        return _unescaped(rest.partition(";")[0])
    user, at, _ = rest.partition("@")
    if not at or scheme not in ("sip", "sips", "im", "pres"):
        return ""
    user = user.partition(":")[0]
    if number := _NUMBER_WITH_PARAMETERS.match(user):
        user = number[1]
    return _unescaped(user)


def host_of(uri: str) -> str:
    """Host of a SIP URI without port and parameters; the rest of any other URI."""
    scheme = scheme_of(uri)
    rest = uri[len(scheme) + 1 :] if scheme else uri
    if scheme and scheme not in ("sip", "sips", "im", "pres"):
        return rest.partition(";")[0]
    host = re.split(r"[;?]", rest.partition("@")[2] or rest, maxsplit=1)[0]
    if host.startswith("["):
        return host[1:].partition("]")[0]
    return host.partition(":")[0].strip()


def _unescaped(text: str) -> str:
    if "%" not in text:
        return text
    return printable(_ESCAPED.sub(_decoded, text))


def _decoded(escaped: re.Match[str]) -> str:
    return bytes.fromhex(escaped[0].replace("%", "")).decode("utf-8", "backslashreplace")


def tag_of(value: str) -> str:
    """Tag of a From or To header field (to-param; 19.3), "" where there is none."""
    found = _TAG.search(value, value.rfind(">") + 1)
    return found[1] if found else ""


def branch_of(via: str) -> str:
    """Branch of the topmost Via (via-branch; 8.1.1.7), "" where there is none or nothing behind the cookie."""
    found = _BRANCH.search(via.partition(",")[0])
    return found[1] if found and found[1] != "z9hG4bK" else ""
