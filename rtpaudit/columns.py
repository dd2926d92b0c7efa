"""Every column of every table: name, kind, unit, meaning and source, in the order in which the tables show them."""

from dataclasses import dataclass
from typing import Literal

Kind = Literal["text", "count", "number", "time", "yes_no"]

# A name ends in its unit unless it has none; this is what the ending says to a reader.
UNITS = {
    "_ms": "ms",
    "_s": "s",
    "_hz": "Hz",
    "_pct": "%",
    "_ppm": "ppm",
    "_dbov": "dBov",
    "_dbm0": "dBm0",
    "_db": "dB",
    "_packets": "packets",
    "packets": "packets",
}


@dataclass(frozen=True, slots=True)
class Column:
    """One column: what it is called, what it holds and how it is known."""

    name: str
    kind: Kind
    unit: str
    """"" where it has none"""
    meaning: str
    """one or two plain sentences"""
    source: str
    """the published text that defines it, or what it is taken from"""


def unit_of(name: str) -> str:
    """Unit that a column name promises, "" where it promises none."""
    if name.startswith(("packets_", "source_packets")):
        return "packets"
    return next((unit for ending, unit in UNITS.items() if name.endswith(ending)), "")


def _text(name: str, meaning: str, source: str) -> Column:
    return Column(name, "text", "", meaning, source)


def _count(name: str, meaning: str, source: str) -> Column:
    return Column(name, "count", unit_of(name), meaning, source)


def _number(name: str, meaning: str, source: str) -> Column:
    return Column(name, "number", unit_of(name), meaning, source)


def _time(name: str, meaning: str, source: str) -> Column:
    return Column(name, "time", "UTC", meaning, source)


def _yes_no(name: str, meaning: str, source: str) -> Column:
    return Column(name, "yes_no", "", meaning, source)


_ID = "numbered by this audit in order of the first packet"
_HEADERS = "packet headers"
_ARRIVALS = "arrival times of the capture"
_G107 = "ITU-T G.107 (06/2015)"

STREAMS = (
    _text("stream", "Id of the stream: one SSRC one way between two address-and-port pairs.", _ID),
    _text("call", "Id of the call that the stream belongs to; empty where it makes none.", _ID),
    _text("capture", "Base name of the capture file, of the first file of a ring.", "name of the file"),
    _text("source", "Address that sent the stream.", _HEADERS),
    _count("source_port", "UDP port that sent the stream.", _HEADERS),
    _text("destination", "Address that the stream was sent to.", _HEADERS),
    _count("destination_port", "UDP port that the stream was sent to.", _HEADERS),
    _text("ssrc", "Synchronisation source identifier, in hexadecimal.", "RFC 3550, 5.1"),
    _count("payload_type", "RTP payload type of most audio packets.", "RFC 3550, 5.1; RFC 3551, 6"),
    _text("encoding", "Encoding by its media subtype; unknown where nothing tells.", "RFC 3551, offer, or user"),
    _count("clock_rate_hz", "Rate at which RTP timestamps count.", "RFC 3551, 4.1; see clock_basis"),
    _count("sampling_rate_hz", "Sampling rate of the decoded audio; G722 samples at twice its clock.", "RFC 3551, 4.5"),
    _number("packet_time_ms", "Audio in one packet, of most packets.", "RTP timestamps; RFC 3551, 4.2"),
    _text(
        "clock_basis",
        "How the clock rate is known: static (payload type), offer (session description), given (by the user) or "
        "inferred (timestamps against arrivals).",
        "RFC 3551, 6; RFC 3264, 5.1",
    ),
    _text(
        "match_basis",
        "How the stream came to its call, in order of trust: announced (address in the signalling), mirror (goes "
        "back where the other came from) or time (they overlap).",
        "this audit",
    ),
    _time("started", "Arrival of the first packet.", _ARRIVALS),
    _time("ended", "Arrival of the last packet.", _ARRIVALS),
    _number("duration_s", "First to last arrival.", _ARRIVALS),
    _count(
        "segments",
        "Runs of one numbering: 1, and one more for every restart or jump of the source's numbering.",
        "RFC 3550, A.1",
    ),
    _count("packets_captured", "Every packet of the stream in the capture, duplicates included.", "counted"),
    _count("packets_received", "Distinct sequence numbers, counted on over wraps.", "RFC 3550, A.1"),
    _count(
        "packets_expected",
        "Highest less lowest sequence number, plus one; summed over segments. A late first packet counts.",
        "RFC 3550, A.3",
    ),
    _count("packets_lost", "Expected less received, over all payload types.", "RFC 3550, A.3"),
    _number("loss_pct", "Lost packets as a share of the expected.", "RFC 3550, A.3"),
    _count("packets_duplicated", "Copies of packets that had come before: captured less received.", "counted"),
    _count(
        "packets_reordered",
        "Arrivals with a sequence number below the highest seen so far, duplicates left out.",
        "RFC 4737, 3",
    ),
    _count(
        "packets_recovered",
        "Lost packets that redundant payloads brought back. They stay counted as lost; those that came in time to be "
        "played are left out of bursts and ratings, and are heard.",
        "RFC 2198",
    ),
    _count("sequence_gaps", "Runs of missing sequence numbers.", "counted"),
    _count("longest_gap_packets", "Longest run of missing sequence numbers.", "counted"),
    _number(
        "jitter_ms",
        "Mean of the interarrival jitter over all audio packets after the first, in order of arrival.",
        "RFC 3550, 6.4.1 and A.8, in floating point",
    ),
    _number("jitter_max_ms", "Highest value of the same estimator.", "RFC 3550, 6.4.1 and A.8"),
    _number("jitter_last_ms", "Value of the same estimator at the last packet.", "RFC 3550, 6.4.1 and A.8"),
    _number(
        "pdv_p50_ms",
        "Packet delay variation: delay beyond the smallest delay of the stream, half of the packets stay at or "
        "below it. Clock skew is removed from 30 s of audio on.",
        "RFC 5481, 4.2",
    ),
    _number("pdv_p95_ms", "The same, which 95 % of the packets stay at or below.", "RFC 5481, 4.2"),
    _number("pdv_p99_ms", "The same, which 99 % of the packets stay at or below.", "RFC 5481, 4.2"),
    _number("pdv_max_ms", "The largest packet delay variation.", "RFC 5481, 4.2"),
    _number(
        "clock_skew_ppm",
        "Sender's media clock against the capture's clock, positive where the sender is fast. Empty below 30 s of "
        "audio.",
        "RTP timestamps against arrival times",
    ),
    _count("dscp", "Differentiated services code point seen on most packets; 46 is expedited forwarding.", "RFC 2474"),
    _number("playout_delay_ms", "Delay of the simulated playout buffer.", "profile, part playout"),
    _count("packets_discarded", "Packets that came too late for the simulated playout buffer.", "RFC 3611, 4.7.1"),
    _number("discard_pct", "Discarded packets as a share of the expected.", "RFC 3611, 4.7.1"),
    _number(
        "burst_ratio",
        "Mean run of lost and discarded packets over the mean run that random loss of the same rate would give; "
        "1 is random. Empty without loss.",
        f"BurstR, {_G107}, 7.5",
    ),
    _number("burst_density_pct", "Share lost or discarded within bursts; 0 without a burst.", "RFC 3611, 4.7.2"),
    _number("burst_duration_ms", "Mean length of a burst (Gmin 16); 0 without a burst.", "RFC 3611, 4.7.2"),
    _number("gap_density_pct", "Share lost or discarded between bursts.", "RFC 3611, 4.7.2"),
    _number("gap_duration_ms", "Mean length of the passages between bursts (Gmin 16).", "RFC 3611, 4.7.2"),
    _number("reported_loss_pct", "Loss that the far receiver reports.", "RFC 3550, 6.4.1"),
    _number("reported_jitter_ms", "Interarrival jitter that the far receiver reports, mean.", "RFC 3550, 6.4.1"),
    _number("round_trip_ms", "Round-trip time between the two ends.", "RFC 3550, 6.4.1 (LSR and DLSR)"),
    _number("loss_before_pct", "Share lost before the capture point.", "sequence numbers of the capture"),
    _number("loss_after_pct", "Share lost after the capture point.", "RFC 3550, 6.4.1, less loss before"),
    _number(
        "one_way_delay_ms",
        "Mouth to ear: network, packet time, playout buffer and look-ahead of the codec.",
        f"{_G107}, Ta; see delay_basis",
    ),
    _text(
        "delay_basis",
        "How the network's part of the delay is known: rtcp (measured), given (by the user) or assumed (50 ms).",
        "RFC 3550, 6.4.1; user; profile",
    ),
    _number("ie_eff", "Effective equipment impairment: codec and loss together.", f"{_G107}, 7.5; ITU-T G.113, App. I"),
    _number(
        "r_factor",
        "Conversational transmission rating; it may fall below 0. Empty where G.113 has no narrowband values for the "
        "encoding.",
        f"{_G107}, 7.1, with Ta = T and Tr = 2 T",
    ),
    _number(
        "mos_cqe", "Mean opinion score, conversational, estimated from the rating; 4.5 at best.", f"{_G107}, Annex B"
    ),
    _number("r_factor_low", "The rating with 150 ms of network delay where the delay is assumed.", f"{_G107}, 7.1"),
    _number("r_factor_high", "The rating with 5 ms of network delay where the delay is assumed.", f"{_G107}, 7.1"),
    _text(
        "rating_note", "What limits the rating, or why there is none; empty where nothing does.", f"{_G107}, 7 and 8"
    ),
    _text(
        "quality_band",
        "Speech transmission quality in words, best to not recommended.",
        "ITU-T G.109 (09/1999), table 1",
    ),
    _number("speech_level_dbov", "Active speech level against digital overload.", "ITU-T P.56, method B"),
    _number("activity_pct", "Share of the time in which there is speech.", "ITU-T P.56, method B"),
    _number("noise_level_dbov", "Level in the pauses between speech.", "this audit"),
    _number("clipped_pct", "Share of samples in runs at the extremes of the code.", "this audit"),
    _yes_no("encrypted", "True where the payload is SRTP or looks it: no audio, no sound measures.", "RFC 3711"),
)

CALLS = (
    _text("call", "Id of the call leg.", _ID),
    _text("conversation", "Id that the legs of one conversation share.", _ID),
    _text("capture", "Base name of the capture file, of the first file of a ring.", "name of the file"),
    _text("call_id", "Call-ID of the dialog; empty without signalling.", "RFC 3261, 8.1.1.4"),
    _text(
        "caller",
        "User part of From, else its address. Without signalling the source of the first packet.",
        "RFC 3261, 8.1.1.3",
    ),
    _text("callee", "User part of To, else its address. Without signalling the other side.", "RFC 3261, 8.1.1.2"),
    _time("started", "First INVITE; without signalling the first packet.", _ARRIVALS),
    _time("answered", "First 2xx response to the INVITE.", "RFC 3261, 13.2.2.4"),
    _time("ended", "BYE, else the last packet.", "RFC 3261, 15"),
    _number("duration_s", "From the answer to the end, else from the start.", _ARRIVALS),
    _text(
        "outcome", "What became of it: answered, cancelled, refused, failed, no reply, or media only.", "RFC 3261, 21"
    ),
    _count(
        "status_code",
        "Final status of the INVITE as the caller got it; challenges and redirects passed over.",
        "RFC 3261, 21",
    ),
    _number("setup_delay_s", "First INVITE to the first response that says anything.", "RFC 6076, 4.3"),
    _text("release_by", "Who hung up: caller, callee, or empty.", "RFC 3261, 15"),
    _count("streams", "Number of streams.", "counted"),
    _text("encoding", "Encodings of the streams, joined by / where they differ.", "streams table"),
    _number("caller_hears_r", "Rating of what reached the caller, from the answer on.", f"{_G107}, 7.1"),
    _number("callee_hears_r", "Rating of what reached the callee, from the answer on.", f"{_G107}, 7.1"),
    _number("r_factor", "Rating of the worse direction.", f"{_G107}, 7.1"),
    _number("mos_cqe", "Mean opinion score of the worse direction, estimated from its rating.", f"{_G107}, Annex B"),
    _text("quality_band", "Quality of the worse direction in words.", "ITU-T G.109 (09/1999), table 1"),
    _number("loss_pct", "Loss of the worse direction.", "RFC 3550, A.3"),
    _number("jitter_ms", "Mean interarrival jitter of the worse direction.", "RFC 3550, A.8"),
    _number("one_way_delay_ms", "Mouth to ear delay of the worse direction.", f"{_G107}, Ta"),
    _text("headline", "Name of the finding that explains most; empty where none is above a remark.", "findings table"),
)

GAPS = (
    _text("stream", "Id of the stream.", _ID),
    _count("first_missing", "Sequence number, 16 bits, of the first missing packet.", "RFC 3550, 5.1"),
    _count("packets_missing", "Packets missing in this run.", "counted"),
    _time("at", "Arrival of the packet before it in sequence.", _ARRIVALS),
    _number("duration_ms", "Media time missing, by the timestamps on both sides.", "RTP timestamps"),
    _number("after_s", "Time since the stream began.", _ARRIVALS),
)

WINDOWS = (
    _text("stream", "Id of the stream.", _ID),
    _number("from_s", "Begin of the 2-second window, counted from the start of the stream.", _ARRIVALS),
    _count(
        "packets_expected", "Packets received in the window, and missing ones by their media time.", "RFC 3550, A.3"
    ),
    _count("packets_lost", "Packets missing, by their media time.", "RFC 3550, A.3"),
    _count("packets_discarded", "Packets that came too late for the simulated playout buffer.", "RFC 3611, 4.7.1"),
    _number("loss_pct", "Lost packets as a share of the expected.", "RFC 3550, A.3"),
    _number("jitter_ms", "Last value of the interarrival jitter in the window.", "RFC 3550, A.8"),
    _number("pdv_p95_ms", "Packet delay variation that 95 % of the packets stay at or below.", "RFC 5481, 4.2"),
    _number("r_factor", "Rating of the window, BurstR taken as 1; empty where nothing was expected.", f"{_G107}, 7.1"),
    _number("activity_pct", "Share of the window in which there is speech.", "ITU-T P.56, method B"),
    _number("level_dbov", "Level of the window against digital overload.", "mean square of the samples"),
)

FINDINGS = (
    _text("finding", "Name of the finding; `rtpaudit explain NAME` tells more.", "catalogue of findings"),
    _text("call", "Id of the call; empty where it concerns the capture.", _ID),
    _text("stream", "Id of the stream; empty where it concerns the call.", _ID),
    _text("severity", "How grave it is: remark, concern or fault.", "effect on the rating, or the rule's own word"),
    _number("r_points", "What this cause alone costs: the rating without it, less the rating.", f"{_G107}, 7.1"),
    _number("from_s", "Where it begins, in seconds of the call.", _ARRIVALS),
    _number("to_s", "Where it ends, in seconds of the call.", _ARRIVALS),
    _text(
        "where",
        "Where the cause sits: before capture point, after capture point, endpoint, capture, or unknown.",
        "capture against reports",
    ),
    _number("measured", "Value that was measured.", "see the finding"),
    _number("limit", "Value from which on it counts.", "see basis"),
    _text("unit", "Unit of the measured value and of the limit.", "see the finding"),
    _text("basis", "Where the limit comes from: the published source, common practice, or profile.", "see the finding"),
    _number("confidence_pct", "How sure the finding is.", "see the finding"),
    _text("says", "One sentence for the ticket.", "this audit"),
    _text("check_next", "One sentence: what to look at next.", "this audit"),
)

SIGNALLING = (
    _time("time", "Arrival of the message.", _ARRIVALS),
    _text("call", "Id of the call; empty where the message belongs to none.", _ID),
    _text("from", "Address and port that sent the message.", _HEADERS),
    _text("to", "Address and port that the message was sent to.", _HEADERS),
    _text("message", "Method of a request, status code and reason of a response.", "RFC 3261, 7.1 and 7.2"),
    _text("line", "The message in one line: what it asks, answers or announces.", "RFC 3261; RFC 3264"),
    _text("protocol", "SIP, MGCP or H.248.", "first line of the message"),
    _text("transport", "UDP, TCP or WebSocket.", _HEADERS),
    _text("call_id", "Call-ID of the dialog.", "RFC 3261, 8.1.1.4"),
    _text("cseq", "Number and method that pair a response with its request.", "RFC 3261, 8.1.1.5"),
    _count("status_code", "Status of a response; empty for a request.", "RFC 3261, 21"),
    _yes_no("repeated", "True for a retransmission of a message seen before.", "RFC 3261, 17"),
    _text("capture", "Base name of the capture file, of the first file of a ring.", "name of the file"),
    _count("frame", "Number of the frame that ends the message, counted from 1 within its file.", "capture file"),
)

EVENTS = (
    _text("call", "Id of the call.", _ID),
    _text("stream", "Id of the stream that carried it.", _ID),
    _time("time", "Begin of the event, by the arrival of its first packet.", _ARRIVALS),
    _number("from_s", "Begin of the event, in seconds of the stream.", "RTP timestamps"),
    _text("event", "Kind of event: digit, flash, or a tone by its name.", "RFC 4733, 3.2"),
    _text("digit", "The key that was pressed; masked by x unless asked for.", "RFC 4733, 3.2"),
    _number("duration_ms", "How long it lasted.", "RFC 4733, 2.3.5"),
    _number("level_dbm0", "Power of the tone.", "RFC 4733, 2.3.4"),
    _text(
        "carried_as",
        "How it came: event (telephone-event packets) or tone (sound in the audio).",
        "RFC 4733; ITU-T Q.23",
    ),
    _count("packets", "Packets that told of the event, repetitions of its end included.", "counted"),
    _yes_no("end_seen", "False where the packet that ends the event is missing.", "RFC 4733, 2.3.2"),
)

REPORTS = (
    _text("call", "Id of the call.", _ID),
    _text("stream", "Id of the stream that is reported on.", _ID),
    _time("time", "Arrival of the report.", _ARRIVALS),
    _text("report", "Kind of report: sender, receiver, extended, or session (RFC 6035).", "RFC 3550, 6.4; RFC 3611"),
    _text("reporter", "Address that sent the report.", _HEADERS),
    _text("reporter_ssrc", "SSRC of the reporter, in hexadecimal.", "RFC 3550, 6.4.1"),
    _number("interval_s", "Time since the report before.", _ARRIVALS),
    _count("packets_expected", "Packets expected since the report before, as reported.", "RFC 3550, A.3"),
    _number("loss_pct", "Share lost since the report before, as reported.", "RFC 3550, 6.4.1 (fraction lost)"),
    _number("captured_loss_pct", "Share that this capture misses in the same interval.", "sequence numbers"),
    _count("packets_lost", "Packets lost since the stream began, as reported; may be negative.", "RFC 3550, 6.4.1"),
    _number("jitter_ms", "Interarrival jitter, as reported.", "RFC 3550, 6.4.1"),
    _number("round_trip_ms", "Round-trip time from this report, corrected for the capture point.", "RFC 3550, 6.4.1"),
    _number("discard_pct", "Share discarded by the reporter's playout buffer.", "RFC 3611, 4.7.1"),
    _number("burst_density_pct", "Share lost or discarded within bursts, as reported.", "RFC 3611, 4.7.2"),
    _number("burst_duration_ms", "Mean length of a burst, as reported.", "RFC 3611, 4.7.2"),
    _number("gap_density_pct", "Share lost or discarded between bursts, as reported.", "RFC 3611, 4.7.2"),
    _number("gap_duration_ms", "Mean length of the passages between bursts, as reported.", "RFC 3611, 4.7.2"),
    _number("end_system_delay_ms", "Delay within the reporter's own device.", "RFC 3611, 4.7.3"),
    _number("signal_level_dbm0", "Level of the speech, as reported.", "RFC 3611, 4.7.4"),
    _number("noise_level_dbm0", "Level of the background noise, as reported.", "RFC 3611, 4.7.4"),
    _number("echo_return_loss_db", "Residual echo return loss, as reported.", "RFC 3611, 4.7.4"),
    _number("r_factor", "Rating by the reporter's own reckoning.", "RFC 3611, 4.7.5"),
    _number("mos_lq", "Listening opinion score by the reporter's own reckoning.", "RFC 3611, 4.7.5"),
    _number("mos_cq", "Conversational opinion score by the reporter's own reckoning.", "RFC 3611, 4.7.5"),
    _number("playout_delay_ms", "Nominal delay of the reporter's playout buffer.", "RFC 3611, 4.7.7"),
    _text("set_aside", "Why the report is not used; empty where it is.", "this audit"),
)

DAMAGE = (
    _text("capture", "Base name of the file.", "name of the file"),
    _count(
        "offset", "Octet of the file, decompressed where it was compressed, at which reading failed.", "capture file"
    ),
    _text("what", "What was found there.", "this audit"),
    _text("lost", "What the audit does without.", "this audit"),
)

TABLES: dict[str, tuple[Column, ...]] = {
    "calls": CALLS,
    "streams": STREAMS,
    "gaps": GAPS,
    "windows": WINDOWS,
    "findings": FINDINGS,
    "signalling": SIGNALLING,
    "events": EVENTS,
    "reports": REPORTS,
    "damage": DAMAGE,
}
