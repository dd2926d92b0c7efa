# ruff: noqa: E501
"""The cases of RFC 4475, written anew message by message; the name of each is the one that the RFC gives it."""

OFFER = b"""v=0
o=mhandley 29739 7272939 IN IP4 192.0.2.1
s=-
c=IN IP4 192.0.2.1
t=0 0
m=audio 49217 RTP/AVP 0 12
m=video 3227 RTP/AVP 31
a=rtpmap:31 LPC
""".replace(b"\n", b"\r\n")


def wire(head: str, body: bytes = b"") -> bytes:
    """Octets of a message whose lines are written below each other."""
    return head.strip("\n").replace("\n", "\r\n").encode() + b"\r\n\r\n" + body


WSINV = wire(
    r"""
INVITE sip:vivekg@chair-dnrc.example.com;unknownparam SIP/2.0
TO :
 sip:vivekg@chair-dnrc.example.com ;   tag    = 1918181833n
from   : "J Rosenberg \\\""       <sip:jdrosen@example.com>
  ;
  tag = 98asjd8
MaX-fOrWaRdS: 0068
Call-ID: wsinv.ndaksdj@192.0.2.1
Content-Length   : 150
cseq: 0009
  INVITE
Via  : SIP  /   2.0
 /UDP
    192.0.2.2;branch=390skdjuw
s :
NewFangledHeader:   newfangled value
 continued newfangled value
UnknownHeaderWithUnusualValue: ;;,,;;,;
Content-Type: application/sdp
Route:
 <sip:services.example.com;lr;unknownwith=value;unknown-no-value>
v:  SIP  / 2.0  / TCP     spindle.example.com   ;
  branch  =   z9hG4bK9ikj8  ,
 SIP  /    2.0   / UDP  192.0.2.111   ; branch=
 z9hG4bK30239
m:"Quoted string \"\"" <sip:jdrosen@example.com> ; newparam =
      newvalue ;
  secondparam ; q = 0.33
""",
    OFFER,
)
"""3.1.1.1, a short tortuous INVITE"""

INTMETH = wire(
    r"""
!interesting-Method0123456789_*+`.%indeed'~ sip:1_unusual.URI~(to-be!sure)&isn't+it$/crazy?,/;;*:&it+has=1,weird!*pas$wo~d_too.(doesn't-it)@example.com SIP/2.0
Via: SIP/2.0/TCP host1.example.com;branch=z9hG4bK-.!%66*_+`'~
To: "BEL:\{07} NUL:\{00} DEL:\{7F}" <sip:1_unusual.URI~(to-be!sure)&isn't+it$/crazy?,/;;*@example.com>
From: token1~` token2'+_ token3*%!.- <sip:mundane@example.com>;fromParam''~+*_!.-%="работающий";tag=_token~1'+`*%!-.
Call-ID: intmeth.word%ZK-!.*_+'@word`~)(><:\/"][?}{
CSeq: 139122385 !interesting-Method0123456789_*+`.%indeed'~
Max-Forwards: 255
extensionHeader-!.%*+_`'~: {EFBBBF}大停電
Content-Length: 0
""".replace("{07}", "\x07")
    .replace("{00}", "\x00")
    .replace("{7F}", "\x7f")
    .replace("{EFBBBF}", "\ufeff")
)
"""3.1.1.2, wide range of valid characters"""

ESC01 = wire(
    """
INVITE sip:sips%3Auser%40example.com@example.net SIP/2.0
To: sip:%75se%72@example.com
From: <sip:I%20have%20spaces@example.net>;tag=938
Max-Forwards: 87
i: esc01.239409asdfakjkn23onasd0-3234
CSeq: 234234 INVITE
Via: SIP/2.0/UDP host5.example.net;branch=z9hG4bKkdjuw
C: application/sdp
Contact:
  <sip:cal%6Cer@host5.example.net;%6C%72;n%61me=v%61lue%25%34%31>
Content-Length: 150
""",
    OFFER,
)
"""3.1.1.3, valid use of the % escaping mechanism"""

ESCNULL = wire(
    """
REGISTER sip:example.com SIP/2.0
To: sip:null-%00-null@example.com
From: sip:null-%00-null@example.com;tag=839923423
Max-Forwards: 70
Call-ID: escnull.39203ndfvkjdasfkq3w4otrq0adsfdfnavd
CSeq: 14398234 REGISTER
Via: SIP/2.0/UDP host5.example.com;branch=z9hG4bKkdjuw
Contact: <sip:%00@host5.example.com>
Contact: <sip:%00%00@host5.example.com>
L:0
"""
)
"""3.1.1.4, escaped nulls in URIs"""

ESC02 = wire(
    """
RE%47IST%45R sip:registrar.example.com SIP/2.0
To: "%Z%45" <sip:resource@example.com>
From: "%Z%45" <sip:resource@example.com>;tag=f232jadfj23
Call-ID: esc02.asdfnqwo34rq23i34jrjasdcnl23nrlknsdf
Via: SIP/2.0/TCP host.example.com;branch=z9hG4bK209%fzsnel234
CSeq: 29344 RE%47IST%45R
Max-Forwards: 70
Contact: <sip:alias1@host1.example.com>
C%6Fntact: <sip:alias2@host2.example.com>
Contact: <sip:alias3@host3.example.com>
l: 0
"""
)
"""3.1.1.5, use of % when it is not an escape"""

LWSDISP = wire(
    """
OPTIONS sip:user@example.com SIP/2.0
To: sip:user@example.com
From: caller<sip:caller@example.com>;tag=323
Max-Forwards: 70
Call-ID: lwsdisp.1234abcd@funky.example.com
CSeq: 60 OPTIONS
Via: SIP/2.0/UDP funky.example.com;branch=z9hG4bKkdjuw
l: 0
"""
)
"""3.1.1.6, message with no LWS between display name and <"""

_VIAS = "".join(
    f"{name}SIP/2.0/TCP sip{33 - row}.example.com\n"
    for row, name in enumerate(["Via: ", "v: ", "V: ", "Via: ", "ViA: ", "VIa: ", "VIA: ", "via: ", "viA: ", "vIa: "])
) + "".join(
    f"{name}SIP/2.0/TCP sip{23 - row}.example.com\n"
    for row, name in enumerate(["vIA: ", "V :  ", "v :  ", "V  : ", "v  : ", "Via : ", "Via  : ", *["Via: "] * 16])
)
LONGREQ = wire(
    f"""
INVITE sip:user@example.com SIP/2.0
To: "I have a user name of {"extreme" * 10} proportion" <sip:user@example.com:6000;unknownparam1=very{"long" * 20}value;longparam{"name" * 25}=shortvalue;very{"long" * 25}ParameterNameWithNoValue>
F: sip:{"amazinglylongcallername" * 5}@example.net;tag=12{"982" * 50}424;unknownheaderparam{"name" * 20}=unknowheaderparam{"value" * 15};unknownValueless{"paramname" * 10}
Call-ID: longreq.one{"really" * 20}longcallid
CSeq: 3882340 INVITE
Unknown-{"Long" * 20}-Name: unknown-{"long" * 20}-value; unknown-{"long" * 20}-parameter-name = unknown-{"long" * 20}-parameter-value
{_VIAS}Via: SIP/2.0/TCP host.example.com;received=192.0.2.5;branch=very{"long" * 50}branchvalue
Max-Forwards: 70
Contact: <sip:{"amazinglylongcallername" * 5}@host5.example.net>
Content-Type: application/sdp
l: 150
""",
    OFFER,
)
"""3.1.1.7, long values in header fields"""

DBLREQ = wire(
    """
REGISTER sip:example.com SIP/2.0
To: sip:j.user@example.com
From: sip:j.user@example.com;tag=43251j3j324
Max-Forwards: 8
I: dblreq.0ha0isndaksdj99sdfafnl3lk233412
Contact: sip:j.user@host.example.com
CSeq: 8 REGISTER
Via: SIP/2.0/UDP 192.0.2.125;branch=z9hG4bKkdjuw23492
Content-Length: 0
""",
    wire(
        """
INVITE sip:joe@example.com SIP/2.0
t: sip:joe@example.com
From: sip:caller@example.net;tag=141334
Max-Forwards: 8
Call-ID: dblreq.0ha0isnda977644900765@192.0.2.15
CSeq: 8 INVITE
Via: SIP/2.0/UDP 192.0.2.15;branch=z9hG4bKkdjuw380234
Content-Type: application/sdp
Content-Length: 150
""",
        OFFER,
    ),
)
"""3.1.1.8, extra trailing octets in a UDP datagram"""

SEMIURI = wire(
    """
OPTIONS sip:user;par=u%40example.net@example.com SIP/2.0
To: sip:j_user@example.com
From: sip:caller@example.org;tag=33242
Max-Forwards: 3
Call-ID: semiuri.0ha0isndaksdj
CSeq: 8 OPTIONS
Accept: application/sdp, application/pkcs7-mime,
        multipart/mixed, multipart/signed,
        message/sip, message/sipfrag
Via: SIP/2.0/UDP 192.0.2.1;branch=z9hG4bKkdjuw
l: 0
"""
)
"""3.1.1.9, semicolon-separated parameters in URI user part"""

TRANSPORTS = wire(
    """
OPTIONS sip:user@example.com SIP/2.0
To: sip:user@example.com
From: <sip:caller@example.com>;tag=323
Max-Forwards: 70
Call-ID:  transports.kijh4akdnaqjkwendsasfdj
Accept: application/sdp
CSeq: 60 OPTIONS
Via: SIP/2.0/UDP t1.example.com;branch=z9hG4bKkdjuw
Via: SIP/2.0/SCTP t2.example.com;branch=z9hG4bKklasjdhf
Via: SIP/2.0/TLS t3.example.com;branch=z9hG4bK2980unddj
Via: SIP/2.0/UNKNOWN t4.example.com;branch=z9hG4bKasd0f3en
Via: SIP/2.0/TCP t5.example.com;branch=z9hG4bK0a9idfnee
l: 0
"""
)
"""3.1.1.10, varied and unknown transport types"""

SIGNATURE = bytes.fromhex("3082015206092a864886f70d010702a08201433082013f0000")
MPART01 = wire(
    """
MESSAGE sip:kumiko@example.org SIP/2.0
Via: SIP/2.0/UDP 127.0.0.1:5070;branch=z9hG4bK-d87543-4dade06d0bdb11ee-1--d87543-;rport
Max-Forwards: 70
Route: <sip:127.0.0.1:5080>
Contact: <sip:fluffy@127.0.0.1:5070>
To: <sip:kumiko@example.org>
From: <sip:fluffy@example.com>;tag=2fb0dcc9
Call-ID: 3d9485ad0c49859b@Zmx1ZmZ5LW1hYy0xNi5sb2NhbA..
CSeq: 1 MESSAGE
Content-Transfer-Encoding: binary
Content-Type: multipart/mixed;boundary=7a9cbec02ceef655
Date: Sat, 15 Oct 2005 04:44:56 GMT
""",
    b"--7a9cbec02ceef655\r\nContent-Type: text/plain\r\nContent-Transfer-Encoding: binary\r\n\r\nHello\r\n"
    b"--7a9cbec02ceef655\r\nContent-Type: application/octet-stream\r\nContent-Transfer-Encoding: binary\r\n\r\n"
    + SIGNATURE
    + b"\r\n--7a9cbec02ceef655--\r\n",
)
"""3.1.1.11, multipart MIME message; the signature is shortened"""

UNREASON = wire(
    """
SIP/2.0 200 = 2**3 * 5**2 но сто девяносто девять - простое
Via: SIP/2.0/UDP 192.0.2.198;branch=z9hG4bK1324923
Call-ID: unreason.1234ksdfak3j2erwedfsASdf
CSeq: 35 INVITE
From: sip:user@example.com;tag=11141343
To: sip:user@example.edu;tag=2229
Content-Length: 150
Content-Type: application/sdp
Contact: <sip:user@host198.example.com>
""",
    OFFER,
)
"""3.1.1.12, unusual reason phrase"""

NOREASON = wire(
    """
SIP/2.0 100\x20
Via: SIP/2.0/UDP 192.0.2.105;branch=z9hG4bK2398ndaoe
Call-ID: noreason.asndj203insdf99223ndf
CSeq: 35 INVITE
From: <sip:user@example.com>;tag=39ansfi3
To: <sip:user@example.edu>;tag=902jndnke3
Content-Length: 0
Contact: <sip:user@host105.example.com>
"""
)
"""3.1.1.13, empty reason phrase"""


def request(
    name: str,
    *,
    start_line: str = "INVITE sip:user@example.com SIP/2.0",
    to: str = "sip:j.user@example.com",
    from_: str = "sip:caller@example.net;tag=134161461246",
    cseq: str = "8 INVITE",
    via: str = "SIP/2.0/UDP 192.0.2.15;branch=z9hG4bKkdjuw",
    length: str = "150",
    extra: str = "",
    body: bytes = OFFER,
) -> bytes:
    """A message that differs from a good one only where its section says."""
    head = f"{start_line}\nTo: {to}\nFrom: {from_}\nMax-Forwards: 7\nCall-ID: {name}.0ha0isndaksdj\nCSeq: {cseq}\n"
    return wire(
        head + f"Via: {via}\n{extra}Content-Type: application/sdp\n" + (f"Content-Length: {length}" if length else ""),
        body,
    )


BADINV01 = request("badinv01", via="SIP/2.0/UDP 192.0.2.15;;,;,,", extra='Contact: "Joe" <sip:joe@example.org>;;;;\n')
"""3.1.2.1, extraneous header field separators"""
CLERR = request("clerr", length="9999")
"""3.1.2.2, content length larger than message"""
NCL = request("ncl", length="-999")
"""3.1.2.3, negative Content-Length"""
FIVE = request("five", length="five")
"""3.1.2.3, a Content-Length that is no number"""
SCALAR02 = request("scalar02", cseq="36893488147419103232 REGISTER", extra="Expires: 1" + "0" * 100 + "\n")
"""3.1.2.4, request scalar fields with overlarge values"""
SCALARLG = request("scalarlg", start_line="SIP/2.0 503 Service Unavailable", cseq="9292394834772304023312 OPTIONS")
"""3.1.2.5, response scalar fields with overlarge values"""
QUOTBAL = request("quotbal", to='"Mr. J. User <sip:j.user@example.com>')
"""3.1.2.6, unterminated quoted string in display name"""
LTGTRURI = request("ltgtruri", start_line="INVITE <sip:user@example.com> SIP/2.0")
"""3.1.2.7, <> enclosing Request-URI"""
LWSRURI = request("lwsruri", start_line="INVITE sip:user@example.com; lr SIP/2.0")
"""3.1.2.8, malformed SIP Request-URI (embedded LWS)"""
LWSSTART = request("lwsstart", start_line="INVITE  sip:user@example.com  SIP/2.0")
"""3.1.2.9, multiple SP separating Request-Line elements"""
TRWS = request("trws", start_line="OPTIONS sip:remote-target@example.com SIP/2.0  ", cseq="238923 OPTIONS")
"""3.1.2.10, SP characters at end of Request-Line"""
ESCRURI = request("escruri", start_line="INVITE sip:user@example.com?Route=%3Csip:example.com%3E SIP/2.0")
"""3.1.2.11, escaped headers in SIP Request-URI"""
BADDATE = request("baddate", extra="Date: Fri, 01 Jan 2010 16:00:00 EST\n")
"""3.1.2.12, invalid time zone in Date header field"""
BADASPEC = request("badaspec", to='"Watson, Thomas" < sip:t.watson@example.org >')
"""3.1.2.14, spaces within addr-spec"""
BADDN = request("baddn", to="Watson, Thomas <sip:t.watson@example.org>")
"""3.1.2.15, non-token characters in display name"""
BADVERS = request("badvers", start_line="OPTIONS sip:t.watson@example.org SIP/7.0", cseq="1 OPTIONS")
"""3.1.2.16, unknown protocol version"""
MISMATCH01 = request("mismatch01", start_line="OPTIONS sip:user@example.com SIP/2.0")
"""3.1.2.17, start line and CSeq method mismatch"""
MISMATCH02 = request("mismatch02", start_line="NEWMETHOD sip:user@example.com SIP/2.0")
"""3.1.2.18, unknown method with CSeq method mismatch"""
BIGCODE = request("bigcode", start_line="SIP/2.0 4294967301 better not break the receiver", cseq="353494 INVITE")
"""3.1.2.19, overlarge response code"""
BADBRANCH = request("badbranch", via="SIP/2.0/UDP 192.0.2.1;branch=z9hG4bK")
"""3.2.1, missing transaction identifier"""
INSUF = wire(
    """
INVITE sip:user@example.com SIP/2.0
CSeq: 193942 INVITE
Via: SIP/2.0/UDP 192.0.2.95;branch=z9hG4bKkdj.insuf
Content-Type: application/sdp
l: 150
""",
    OFFER,
)
"""3.3.1, missing required header fields"""
UNKSCM = request("unkscm", start_line="OPTIONS nobodyKnowsThisScheme:totallyopaquecontent SIP/2.0", cseq="3 OPTIONS")
"""3.3.2, Request-URI with unknown scheme"""
NOVELSC = request("novelsc", start_line="OPTIONS soap.beep://192.0.2.103:3002 SIP/2.0", cseq="3923423 OPTIONS")
"""3.3.3, Request-URI with known but atypical scheme"""
UNKSM2 = request("unksm2", to="isbn:2983792873", from_="<http://www.example.com>;tag=3234233")
"""3.3.4, unknown URI schemes in header fields"""
MULTI01 = wire(
    """
INVITE sip:user@example.com SIP/2.0
Contact: <sip:caller@host25.example.net>
Via: SIP/2.0/UDP 192.0.2.25;branch=z9hG4bKkdjuw
Max-Forwards: 70
CSeq: 5 INVITE
Call-ID: multi01.98asdh@192.0.2.1
CSeq: 59 INVITE
Call-ID: multi01.98asdh@192.0.2.2
From: sip:caller@example.com;tag=3413415
To: sip:user@example.com
To: sip:other@example.net
From: sip:caller@example.net;tag=2923420123
Content-Type: application/sdp
l: 150
Contact: <sip:caller@host36.example.net>
Max-Forwards: 5
""",
    OFFER,
)
"""3.3.8, multiple values in single value required fields"""
MCL01 = wire(
    """
OPTIONS sip:user@example.com SIP/2.0
Via: SIP/2.0/UDP host5.example.net;branch=z9hG4bK293423
To: sip:user@example.com
From: sip:other@example.net;tag=3923942
Call-ID: mcl01.fhn2323orihawfdoa3o4r52o3irsdf
CSeq: 15932 OPTIONS
Content-Length: 13
Max-Forwards: 60
Content-Length: 5
Content-Type: text/plain
""",
    b"There's no way to know how many octets are supposed to be here.\r\n",
)
"""3.3.9, multiple Content-Length values"""
INV2543 = wire(
    """
INVITE sip:UserB@example.com SIP/2.0
Via: SIP/2.0/UDP iftgw.example.com
From: <sip:+13035551111@ift.client.example.net;user=phone>
Record-Route: <sip:UserB@example.com;maddr=ss1.example.com>
To: sip:+16505552222@ss1.example.net;user=phone
Call-ID: inv2543.1717@ift.client.example.com
CSeq: 56 INVITE
Content-Type: application/sdp
""",
    OFFER,
)
"""3.4.1, INVITE with RFC 2543 syntax"""

VALID = [WSINV, INTMETH, ESC01, ESCNULL, ESC02, LWSDISP, LONGREQ, SEMIURI, TRANSPORTS, MPART01, UNREASON, NOREASON]
VALID += [BADDATE, BADBRANCH, UNKSCM, NOVELSC, UNKSM2, INV2543]
TOLERATED = [BADINV01, CLERR, NCL, FIVE, QUOTBAL, LTGTRURI, LWSRURI, LWSSTART, TRWS, ESCRURI, BADASPEC, BADDN]
TOLERATED += [MISMATCH01, MISMATCH02, MULTI01, MCL01, DBLREQ]
REFUSED = [SCALAR02, SCALARLG, BADVERS, BIGCODE, INSUF]
