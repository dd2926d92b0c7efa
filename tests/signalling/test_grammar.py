import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtpaudit.signalling.grammar import branch_of, host_of, name_address, split_values, tag_of, user_of
from rtpaudit.signalling.sip import parse_message
from tests.signalling import torture


def test_rfc_4475_3_1_1_1_from_with_quoted_pairs_and_spaces_around_the_tag() -> None:
    from_ = parse_message(torture.WSINV).header("from")
    assert name_address(from_).display_name == 'J Rosenberg \\"'
    assert name_address(from_).uri == "sip:jdrosen@example.com"
    assert tag_of(from_) == name_address(from_).parameters["tag"] == "98asjd8"


def test_rfc_4475_3_1_1_1_contact_parameters_with_and_without_values() -> None:
    contact = name_address(parse_message(torture.WSINV).header("contact"))
    assert contact.display_name == 'Quoted string ""'
    assert contact.parameters == {"newparam": "newvalue", "secondparam": "", "q": "0.33"}


def test_rfc_4475_3_1_1_1_branch_of_the_topmost_via() -> None:
    vias = parse_message(torture.WSINV).headers["via"]
    assert [branch_of(via) for via in vias] == ["390skdjuw", "z9hG4bK9ikj8"]


def test_rfc_4475_3_1_1_2_user_part_of_odd_letters_loses_its_password() -> None:
    message = parse_message(torture.INTMETH)
    assert user_of(message.request_uri) == "1_unusual.URI~(to-be!sure)&isn't+it$/crazy?,/;;*"
    from_ = name_address(message.header("from"))
    assert from_.display_name == "token1~` token2'+_ token3*%!.-"
    assert from_.parameters["fromparam''~+*_!.-%"] == "работающий"
    assert tag_of(message.header("from")) == "_token~1'+`*%!-."


def test_rfc_4475_3_1_1_3_user_parts_are_unescaped_once() -> None:
    message = parse_message(torture.ESC01)
    assert user_of(name_address(message.header("to")).uri) == "user"
    assert user_of(name_address(message.header("from")).uri) == "I have spaces"
    assert user_of(message.request_uri) == "sips:user@example.com"
    assert user_of("sip:a%2541@example.com") == "a%41"


def test_rfc_4475_3_1_1_4_an_escaped_null_does_not_end_a_name() -> None:
    assert user_of("sip:null-%00-null@example.com") == "null-\\x00-null"


def test_rfc_4475_3_1_1_5_percent_is_no_escape_in_a_display_name() -> None:
    assert name_address(parse_message(torture.ESC02).header("from")).display_name == "%Z%45"


def test_rfc_4475_3_1_1_6_no_space_before_the_bracket() -> None:
    from_ = name_address(parse_message(torture.LWSDISP).header("from"))
    assert (from_.display_name, from_.uri) == ("caller", "sip:caller@example.com")


def test_rfc_4475_3_1_1_9_semicolons_in_the_user_part_belong_to_it() -> None:
    assert user_of(parse_message(torture.SEMIURI).request_uri) == "user;par=u@example.net"


@pytest.mark.parametrize(
    ("octets", "display_name", "uri"),
    [
        (torture.QUOTBAL, "Mr. J. User", "sip:j.user@example.com"),
        (torture.BADASPEC, "Watson, Thomas", "sip:t.watson@example.org"),
        (torture.BADDN, "Watson, Thomas", "sip:t.watson@example.org"),
        (torture.UNKSM2, "", "isbn:2983792873"),
    ],
)
def test_rfc_4475_3_1_2_6_and_14_and_15_slips_in_a_name_are_overlooked(
    octets: bytes, display_name: str, uri: str
) -> None:
    to = name_address(parse_message(octets).header("to"))
    assert (to.display_name, to.uri) == (display_name, uri)


def test_rfc_4475_3_2_1_a_branch_of_nothing_but_the_cookie_is_none() -> None:
    assert branch_of(parse_message(torture.BADBRANCH).header("via")) == ""


@pytest.mark.parametrize(
    ("uri", "user", "host"),
    [
        ("sip:0142@192.0.2.10:5060;transport=udp", "0142", "192.0.2.10"),
        ("sips:ferry-desk:secret@desk.example", "ferry-desk", "desk.example"),
        ("sip:+1-201-555-0123;phone-context=example.net@gw.example;user=phone", "+1-201-555-0123", "gw.example"),
        ("tel:+1-201-555-0123;ext=7", "+1-201-555-0123", "+1-201-555-0123"),
        ("sip:[2001:db8::10]:5060", "", "2001:db8::10"),
        ("sip:desk.example", "", "desk.example"),
        ("isbn:2983792873", "", "2983792873"),
        ("", "", ""),
    ],
)
def test_user_and_host_of_a_uri(uri: str, user: str, host: str) -> None:
    assert (user_of(uri), host_of(uri)) == (user, host)


def test_commas_within_quotes_and_brackets_part_nothing() -> None:
    line = r'"A, \"B" <sip:a,b@example.com>;x="1,2", <sip:c@example.com> , sip:d@example.com,,'
    assert list(split_values(line)) == [
        r'"A, \"B" <sip:a,b@example.com>;x="1,2"',
        "<sip:c@example.com>",
        "sip:d@example.com",
    ]


def test_a_tag_inside_the_uri_or_the_name_is_no_tag_of_the_dialog() -> None:
    assert tag_of('";tag=a" <sip:u@example.com;tag=b>;tag=c') == "c"
    assert tag_of("<sip:u@example.com;tag=b>") == ""


@given(st.text(max_size=200))
def test_any_text_gives_a_name_and_a_user(text: str) -> None:
    address = name_address(text)
    user_of(address.uri)
    host_of(text)
    tag_of(text)
    branch_of(text)


@given(st.lists(st.sampled_from(['"', "<", ">", ",", "\\", "a", ";"]), max_size=40))
def test_parts_put_together_again_hold_every_letter_that_separates_nothing(letters: list[str]) -> None:
    text = "".join(letters)
    assert "".join(split_values(text)).replace(",", "") == text.replace(",", "")
