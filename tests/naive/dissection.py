"""Frames read by scapy and by dpkt, layer after layer, to the values of a row: slow, and by other people's code."""

import socket
from dataclasses import dataclass
from typing import Any

import dpkt

from rtpaudit.decode.rare import load_scapy

ICMP_OF_VERSION = {4: 1, 6: 58}


@dataclass(frozen=True)
class Dissected:
    """What both dissectors can tell of a packet."""

    source: str
    source_port: int
    destination: str
    destination_port: int
    protocol: int
    octets: bytes
    length: int
    dscp: int
    ttl: int
    ip_id: int
    vlan: int


SCAPY: dict[str, Any] = {}


def scapy_classes() -> dict[str, Any]:
    if not SCAPY:
        SCAPY.update(load_scapy())
        from scapy.contrib import erspan, geneve, gtp
        from scapy.layers import vxlan

        for module in (erspan, geneve, gtp, vxlan):
            SCAPY.update(vars(module))
    return SCAPY


ENTRY = {
    1: "Ether",
    9: "PPP",
    50: "PPP",
    101: "IPv46",
    113: "CookedLinux",
    127: "RadioTap",
    219: "MPLS",
    276: "CookedLinuxV2",
}


def by_scapy(frame: bytes, original: int, link_type: int) -> Dissected | None:
    """The innermost UDP, TCP or ICMP packet of a frame; None where there is none, or only a fragment."""
    classes = scapy_classes()
    layer = classes[ENTRY[link_type]](frame)
    vlan, found, network, length = 0, None, None, original
    while layer:
        payload = layer.payload
        if isinstance(layer, classes["Dot1Q"]):
            vlan = layer.vlan or vlan
        elif isinstance(layer, classes["IPv6"]):
            network, identification = layer, 0
            length = layer.plen or len(layer.original) - 40 + original - len(frame)
        elif isinstance(layer, classes["IP"]):
            network, identification = layer, layer.id
            length = (layer.len or len(layer.original) + original - len(frame)) - 4 * layer.ihl
            if layer.flags.MF or layer.frag:
                return None
        elif isinstance(layer, classes["IPv6ExtHdrFragment"]):
            if layer.m or layer.offset:
                return None
            identification = layer.id & 0xFFFF
            length -= 8
        elif isinstance(layer, (classes["UDP"], classes["TCP"])) or _is_icmp(layer, network):
            found = _row(layer, network, identification, length, vlan)
            if not isinstance(layer, classes["UDP"]):
                return found
        elif network is not None and found is None:
            length -= len(layer.original) - len(payload.original)
        layer = payload
    return found


def _is_icmp(layer: Any, network: Any) -> bool:
    classes = scapy_classes()
    return isinstance(layer, classes["ICMP"]) or (
        network is not None and network.version == 6 and type(layer).__name__.startswith(("ICMPv6", "MIP6MH"))
    )


def _row(layer: Any, network: Any, identification: int, length: int, vlan: int) -> Dissected:
    classes = scapy_classes()
    six = network.version == 6
    octets = layer.original[:length]
    ports, protocol = (0, 0), ICMP_OF_VERSION[network.version]
    if isinstance(layer, classes["UDP"]):
        ports, protocol = (layer.sport, layer.dport), 17
        if 8 <= layer.len < length:
            length = layer.len
        octets, length = layer.original[8:length], length - 8
    elif isinstance(layer, classes["TCP"]):
        ports, protocol = (layer.sport, layer.dport), 6
    return Dissected(
        network.src,
        ports[0],
        network.dst,
        ports[1],
        protocol,
        octets,
        length,
        (network.tc if six else network.tos) >> 2,
        network.hlim if six else network.ttl,
        identification,
        vlan,
    )


def by_dpkt(frame: bytes, link_type: int) -> Dissected | None:
    """The same of an uncut Ethernet, cooked, raw or PPP frame without tunnels; dpkt knows no more of use here."""
    classes = {1: dpkt.ethernet.Ethernet, 113: dpkt.sll.SLL, 276: dpkt.sll2.SLL2, 9: dpkt.ppp.PPP}
    if link_type == 101:
        packet: Any = dpkt.ip6.IP6(frame) if frame[0] >> 4 == 6 else dpkt.ip.IP(frame)
        vlan = 0
    else:
        # dpkt takes an address and control for granted that PPP may leave out.
        bare_ppp = link_type == 9 and not frame.startswith(b"\xff\x03")
        link = classes[link_type](b"\xff\x03" + frame if bare_ppp else frame)
        vlan = link.vlan_tags[-1].id if getattr(link, "vlan_tags", None) else 0
        packet = link.data
    if isinstance(packet, dpkt.ip.IP):
        if packet.mf or packet.offset:
            return None
        family, dscp, ttl, identification, protocol = socket.AF_INET, packet.tos >> 2, packet.ttl, packet.id, packet.p
    elif isinstance(packet, dpkt.ip6.IP6):
        family, dscp, ttl, identification, protocol = socket.AF_INET6, packet.fc >> 2, packet.hlim, 0, packet.p
    else:
        return None
    inner = packet.data
    ports, octets = (0, 0), bytes(inner)
    if isinstance(inner, (dpkt.udp.UDP, dpkt.tcp.TCP)):
        ports = (inner.sport, inner.dport)
        octets = bytes(inner.data)[: inner.ulen - 8] if isinstance(inner, dpkt.udp.UDP) else bytes(inner)
    elif not isinstance(inner, (dpkt.icmp.ICMP, dpkt.icmp6.ICMP6)):
        return None
    source, destination = (socket.inet_ntop(family, address) for address in (packet.src, packet.dst))
    return Dissected(
        source, ports[0], destination, ports[1], protocol, octets, len(octets), dscp, ttl, identification, vlan
    )
