"""The layers a framing is made of: what each adds to a packet, and what it can be put around.

A further layer is a further class: its options, the kinds of packet that it takes, `around`, and
`account`, the same in words. Then it goes into `LAYERS`. docs/figures.md derives each in one line,
with its source.
"""

from collections.abc import Mapping
from types import MappingProxyType

from linkwatch.errors import InputError
from linkwatch.plan.layers.atm import Aal5
from linkwatch.plan.layers.ethernet import Ethernet, Pppoe, Vlan
from linkwatch.plan.layers.layer import Layer, options_of
from linkwatch.plan.layers.serial import Crtp, FrameRelay, Hdlc, Mlppp, Ppp
from linkwatch.plan.layers.tunnels import Esp, Gre, Ipip, Mpls
from linkwatch.plan.wording import nearest, one_of, quoted

LAYERS: Mapping[str, type[Layer]] = MappingProxyType(
    {
        layer.name: layer
        for layer in (
            Aal5, Crtp, Esp, Ethernet, FrameRelay, Gre, Hdlc, Ipip, Mlppp, Mpls, Ppp, Pppoe, Vlan
        )
    }
)  # fmt: skip


def make_layer(name: str, options: Mapping[str, object]) -> Layer:
    """Returns the layer of that name.

    Args:
        name: A layer's name.
        options: Its options by name; those that are not given keep their default.

    Raises:
        InputError: There is no such layer, no such option, or no such value.
    """
    kind = LAYERS.get(name.strip().lower())
    if kind is None:
        raise InputError(
            "layer", got=quoted(name), wanted=one_of(LAYERS), remedy=nearest(name, LAYERS)
        )
    allowed = options_of(kind)
    for option, value in options.items():
        if option not in allowed:
            raise InputError(
                f"option of {kind.name}",
                got=quoted(option),
                wanted=one_of(allowed) if allowed else "none: it has no options",
                remedy=nearest(str(option), allowed),
            )
        # To Python True is 1, but "flags: yes" is no number.
        if not any(value == v and type(value) is type(v) for v in allowed[option]):
            raise InputError(
                f"{kind.name}.{option}", got=quoted(value), wanted=one_of(allowed[option])
            )
    return kind(**options)
