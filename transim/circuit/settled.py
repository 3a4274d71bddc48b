"""The decks of the settled states beyond the carriers: against frequency, and against the holding current."""

from __future__ import annotations

from collections.abc import Sequence

from transim.circuit.decks import Deck, Origin, control_block, deck_head, option_cards, quiet_ports
from transim.circuit.netlist import Netlist, ThrowPlace
from transim.design.model import Control, Numerics, Static
from transim.quantities import deck_number, format_quantity

__all__ = ["bias_deck", "bias_vectors", "shared_throws", "sweep_deck"]


def sweep_deck(netlist: Netlist, control: Control, static: Static, numerics: Numerics, origin: Origin) -> Deck:
    """Write the deck of both control states against frequency.

    Its raw file holds, for the command low and then high, one AC plot for each port (excited with 1 V behind
    its impedance).

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    static : Static
        Range and points a decade.
    numerics : Numerics
        Tolerance.
    origin : Origin
        For the head.

    Returns
    -------
    Deck
    """
    what = [
        "Sweep: both control states against frequency; AC with 1 V behind each port's impedance in turn.",
        "S of ports i, j from the plots: 2 v(p_i) - (1 if i = j), "
        f"all ports at {format_quantity(netlist.ports[0].impedance, 'ohm')}.",
    ]
    nodes = " ".join(f"v({port.node})" for port in netlist.ports)
    sweep = f"  ac dec {static.points} {deck_number(static.start)} {deck_number(static.stop)}"
    steps = []
    for port in netlist.ports:
        steps += [f"  alter {port.source} acmag = 1", sweep, f"  write sweep.raw {nodes}"]
        steps.append(f"  alter {port.source} acmag = 0")
    loop = [
        f"foreach level {deck_number(control.low)} {deck_number(control.high)}",
        "  alter vcontrol dc = $level",
        *steps,
        "end",
    ]
    command = f"Vcontrol ctl 0 DC {deck_number(control.low)}\n"
    return _deck("sweep", netlist, what, (command, loop), numerics, origin)


def bias_vectors(netlist: Netlist) -> tuple[str, ...]:
    """Return the vectors of an operating point that a bias deck writes.

    Parameters
    ----------
    netlist : Netlist
        The circuit.

    Returns
    -------
    tuple of str
        The voltage of the bias entry, then what the junctions' charges are made of.
    """
    charges = (name for probe in netlist.probes if probe.quantity == "charge" for _, name in probe.terms)
    return tuple(dict.fromkeys(("v(drive)", *charges)))


def shared_throws(netlist: Netlist) -> tuple[ThrowPlace, ...]:
    """Return the throws that a bias deck shows.

    Parameters
    ----------
    netlist : Netlist
        The circuit.

    Returns
    -------
    tuple of ThrowPlace
        Those that the RF enters at the same port as the first one.
    """
    return tuple(throw for throw in netlist.throws if throw.through[0] == netlist.throws[0].through[0])


def bias_deck(netlist: Netlist, static: Static, carriers: Sequence[float], numerics: Numerics, origin: Origin) -> Deck:
    """Write the deck that steps the holding current.

    Its raw file holds for each current one operating point, then one AC plot for each carrier with 1 V behind
    the impedance of the port that is judged from.

    Parameters
    ----------
    netlist : Netlist
        The circuit without a driver; its source ``iholding`` feeds the bias entry.
    static : Static
        Currents.
    carriers : sequence of float
        [Hz].
    numerics : Numerics
        Tolerance.
    origin : Origin
        For the head; the deck's name carries its temperature, because it belongs to no driver.

    Returns
    -------
    Deck
    """
    name = f"bias_{format_quantity(origin.temperature, 'degC', 12).replace(' ', '')}"
    throws = shared_throws(netlist)
    first = netlist.ports[throws[0].through[0]]
    far = [netlist.ports[throw.through[1]].node for throw in throws]
    what = [
        "Bias: a current source in place of the driver, stepped; operating point, then AC at every carrier",
        f"with 1 V behind the impedance of {first.node}. S from {first.node}: "
        f"{', '.join(f'2 v({node}) to {node}' for node in far)}.",
    ]
    steps = []
    for carrier in carriers:
        number = deck_number(carrier)
        steps += [f"  ac lin 1 {number} {number}", f"  write {name}.raw {' '.join(f'v({node})' for node in far)}"]
    loop = [
        f"alter {first.source} acmag = 1",
        f"foreach holding {' '.join(map(deck_number, static.bias_sweep))}",
        "  alter iholding dc = $holding",
        "  op",
        f"  write {name}.raw {' '.join(bias_vectors(netlist))}",
        *steps,
        "end",
    ]
    return _deck(name, netlist, what, ("", loop), numerics, origin)


def _deck(
    name: str,
    netlist: Netlist,
    what: Sequence[str],
    parts: tuple[str, Sequence[str]],
    numerics: Numerics,
    origin: Origin,
) -> Deck:
    """Put head, circuit and control block together; `parts` are source lines and commands."""
    sources, commands = parts
    script = "\n".join(control_block(commands))
    text = (
        deck_head(name, origin, what, True)
        + netlist.text
        + sources
        + quiet_ports(netlist.ports)
        + option_cards(numerics, origin.temperature, "gear")
        + script
        + "\n.end\n"
    )
    return Deck(name, text, writes_raw=True)
