"""The page as a file: nothing of a capture becomes markup or script, and nothing is loaded."""

import base64
import hashlib
import json
import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.report import shell

HOSTILE = "</script><script>alert(1)</script><!--<img src=x onerror=alert(1)>\u2028\u2029&amp;"


@given(st.text())
def test_json_brings_every_text_back_and_ends_no_element(text) -> None:
    written = shell.as_json({"text": text})
    assert json.loads(written) == {"text": text}
    assert not set(written) & set("<>&\u2028\u2029")


def test_templates_escape_what_they_are_given() -> None:
    line = {"call": "c01", "who": HOSTILE, "ratings": HOSTILE, "sentence": HOSTILE}
    page = shell.render("section_overview.html", {"overview": [line], "left_out": HOSTILE})
    assert not re.search(r"<(?:script|img|!--)", page)
    assert "&lt;/script&gt;" in page


def test_a_name_that_is_missing_in_a_template_is_told() -> None:
    with pytest.raises(Exception, match="is undefined"):
        shell.render("section_overview.html", {})


def test_scripts_are_known_by_their_digests() -> None:
    digest = base64.b64encode(hashlib.sha256(b"let a = 1;").digest()).decode()
    assert f"script-src 'sha256-{digest}' " in shell.policy(["let a = 1;"])


def test_the_policy_lets_nothing_reach_a_network() -> None:
    policy = shell.policy([])
    assert "default-src 'none'" in policy
    assert "connect-src 'none'" in policy
    assert not re.search(r"https?:|unsafe-eval|script-src [^;]*unsafe-inline", policy)


def test_no_script_of_ours_makes_markup_of_text() -> None:
    script = shell.script()
    assert not re.search(
        r"innerHTML|outerHTML|insertAdjacentHTML|document\.write|\beval\(|new Function|fetch\(|XMLHttpRequest", script
    )


def test_the_library_ends_no_element_early() -> None:
    library = shell.library()
    assert "Bokeh" in library
    assert "</script" not in library.lower()
    assert "\r" not in library


def test_stylesheet_and_templates_name_no_other_host() -> None:
    for text in (shell.stylesheet(), shell.script()):
        assert not re.search(r"https?://|url\(", text)
