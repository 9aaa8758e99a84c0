"""ATM: packets and frames in cells of 53 octets."""

from dataclasses import dataclass
from typing import ClassVar

from typing_extensions import override

from linkwatch.plan.layers.layer import ROUTED_OR_LABELLED, Layer, choice, sum_in_words
from linkwatch.plan.layers.packet import Count, Kind, Packet, filled


@dataclass(frozen=True, slots=True)
class Aal5(Layer):
    """AAL5 (RFC 2684, RFC 2364): routed around a packet, bridged around ethernet, PPP around ppp.

    Attributes:
        encapsulation: Whether a header says what is carried, or the circuit itself does.
        fcs: Whether a bridged Ethernet frame keeps its check sequence, and with it its padding.
    """

    name: ClassVar = "aal5"
    takes: ClassVar = ROUTED_OR_LABELLED | {Kind.FRAME, Kind.PPP}

    encapsulation: str = choice("llc-snap", "vc-mux")
    fcs: bool = choice(False, True)

    def _header(self, carried: Kind) -> int:
        if self.encapsulation == "llc-snap":
            return {Kind.FRAME: 10, Kind.PPP: 4}.get(carried, 8)
        return 2 if carried is Kind.FRAME else 0

    @override
    def around(self, packet: Packet[Count]) -> Packet[Count]:
        whole = packet.kind is Kind.FRAME and self.fcs
        carried = packet.octets if whole else packet.bare
        cells = filled(carried + (self._header(packet.kind) + 8), 48) // 48 * 53
        return Packet(cells, cells, packet.header, Kind.DONE)

    @override
    def account(self, kind: Kind) -> str:
        header = self.encapsulation, self._header(kind)
        how = {Kind.FRAME: "bridged", Kind.PPP: "PPP"}.get(kind, "routed")
        if kind is Kind.FRAME:
            how += " with FCS" if self.fcs else " without FCS"
        return f"{how}: {sum_in_words(header, ('trailer', 8))}; cells of 53 carry 48"
