"""Which agreement media of a flow goes by."""

import numpy as np

from rtpaudit.decode.packets import Flows
from rtpaudit.media.agreed import Agreed
from rtpaudit.signalling.calls import CALLEE, CALLER, MediaTerm
from rtpaudit.signalling.payload_types import Encoding
from tests.media.made_calls import S, party, sip_call

OPUS, EVENTS = Encoding("opus", 48000, 48000, 2), Encoding("telephone-event", 8000, 8000)


def agreed(**callee: dict[int, Encoding]) -> Agreed:
    terms = [
        MediaTerm(0, None, CALLER, "audio", "192.0.2.1", 4000, "RTP/AVP", "sendrecv", {111: OPUS, 101: EVENTS}),
        MediaTerm(0, None, CALLEE, "audio", "198.51.100.1", 5000, "RTP/AVP", "sendrecv", callee["types"]),
    ]
    call = sip_call("one@example.com", party("0142", "192.0.2.1"), party("0199", "198.51.100.1"), media=terms)
    return Agreed([call])


def flows(destination: tuple[int, ...]) -> Flows:
    ends = np.zeros((2, 1, 16), np.uint8)
    ends[0, 0, :4], ends[1, 0, :4] = (192, 0, 2, 1), destination
    ports = np.array([[4000], [5000]], np.uint16)
    return Flows(ends[0], ends[1], *ports, np.full(1, 4, np.uint8), np.full(1, 17, np.uint8))


def test_the_receivers_own_numbers_come_first():
    offered = agreed(types={111: EVENTS}).offered(flows((198, 51, 100, 1)))
    assert offered is not None
    assert offered(0, 111, S) == EVENTS


def test_what_only_the_sender_announced_is_the_next_best():
    for destination in ((198, 51, 100, 1), (203, 0, 113, 9)):
        offered = agreed(types={}).offered(flows(destination))
        assert offered is not None
        assert offered(0, 101, S) == EVENTS


def test_the_dialog_is_known_from_either_end():
    for destination in ((198, 51, 100, 1), (203, 0, 113, 9)):
        dialog_of = agreed(types={}).dialog_of(flows(destination))
        assert dialog_of is not None
        found = dialog_of(0, S)
        assert found is not None
        assert found.call_id == "one@example.com"
