"""The decks: complete SPICE text for each analysis, which runs in plain ``ngspice -b`` by itself."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from transim.circuit.netlist import Netlist, RfPort
from transim.circuit.timeline import Timeline
from transim.design.model import Control, Numerics
from transim.quantities import deck_number, format_quantity

__all__ = [
    "Deck",
    "Origin",
    "Tone",
    "carrier_deck",
    "control_block",
    "deck_head",
    "entered_ports",
    "option_cards",
    "point_deck",
    "quiet_ports",
    "static_deck",
    "video_deck",
]

_UNITS = (
    "Units: V, A, s, Hz, ohm, F, H, C; node 0 is ground; the driver's current is i(vdrive), "
    "positive into the bias entry."
)


@dataclass(frozen=True)
class Origin:
    """Where a deck comes from: title and file of the design, driver, temperature [degC]."""

    title: str
    file: str
    driver: str
    temperature: float


@dataclass(frozen=True)
class Deck:
    """A deck.

    Attributes
    ----------
    name : str
        Stem of its file name.
    text : str
        The deck.
    writes_raw : bool
        Whether its own control block writes NAME.raw; otherwise ngspice's option ``-r`` does.
    stop : float or None
        End of a transient [s].
    group : str
        Folder for decks that come in sets; empty otherwise.
    """

    name: str
    text: str
    writes_raw: bool
    stop: float | None = None
    group: str = ""


def deck_head(name: str, origin: Origin, what: Sequence[str], writes_raw: bool) -> str:
    """Return the comment lines that every deck begins with.

    Parameters
    ----------
    name : str
        Stem of the deck's file name.
    origin : Origin
        Where it comes from.
    what : sequence of str
        What it is, one line each.
    writes_raw : bool
        Whether its own control block writes the raw file.
    """
    option = "" if writes_raw else f" -r {name}.raw"
    lines = [
        f"* transim {name} deck",
        f"* design: {origin.title} ({origin.file})",
        f"* driver: {origin.driver}; temperature: {format_quantity(origin.temperature, 'degC')}",
        *(f"* {line}" for line in what),
        f"* {_UNITS}",
        f"* Run: ngspice -b{option} {name}.cir",
    ]
    # a title or a file's name must not bring a line of its own
    return "".join(f"{''.join(c if c.isprintable() else '?' for c in line)}\n" for line in lines)


def option_cards(numerics: Numerics, temperature: float, method: str) -> str:
    """Return the option cards: tolerance, integration method and temperature [degC]."""
    return (
        f".options reltol={deck_number(numerics.reltol)} method={method} noacct\n"
        f".options temp={deck_number(temperature)}\n"
    )


def _command(control: Control, timeline: Timeline) -> str:
    """Return the command source; its 0 to 100 % edges are centred on the timeline's 50 % points."""
    if timeline.command:
        # a point at zero, then the record; twelve digits as below
        corners = [(float(f"{time:.12g}"), volts) for time, volts in timeline.command]
        points = [(0.0, control.low)] * (corners[0][0] > 0.0) + corners
        lines = "".join(f"+ {deck_number(time)} {deck_number(volts)}\n" for time, volts in points)
        return f"Vcontrol ctl 0 DC {deck_number(control.low)} PWL(\n{lines}+ )\n"
    times = (
        timeline.lead - timeline.edge / 2.0,
        timeline.edge,
        timeline.edge,
        timeline.on_for - timeline.edge,
        timeline.period,
    )
    # twelve digits: binary fractions of a sum of times only make the deck hard to read
    numbers = [control.low, control.high, *(float(f"{value:.12g}") for value in times)]
    text = " ".join(map(deck_number, numbers))
    return f"Vcontrol ctl 0 DC {deck_number(control.low)} PULSE({text})\n"


def quiet_ports(ports: Sequence[RfPort]) -> str:
    """Return the RF sources of all ports, silent until a control block alters them."""
    return "".join(f"{port.source} e{port.node} 0 DC 0 AC 0\n" for port in ports)


def control_block(commands: Sequence[str]) -> list[str]:
    """Return a control block that writes its plots one after the other into one raw file, and a new one at each run.

    Parameters
    ----------
    commands : sequence of str
        With at least one ``write``.
    """
    first = next(k for k, command in enumerate(commands) if command.split()[0] == "write")
    # the first write begins the file anew, the others append
    ordered = [*commands[: first + 1], "set appendwrite", *commands[first + 1 :]]
    return [".control", "set filetype=binary", *ordered, "quit 0", ".endc"]


def static_deck(
    netlist: Netlist, control: Control, frequencies: Sequence[float], numerics: Numerics, origin: Origin
) -> Deck:
    """Write the deck of both control states: operating point and S-parameters.

    Its raw file holds, for the command low and then high, one operating point and then one AC plot for each
    port (excited with 1 V behind its impedance) and frequency.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    frequencies : sequence of float
        Carriers [Hz].
    numerics : Numerics
        Tolerance.
    origin : Origin
        For the head.

    Returns
    -------
    Deck
    """
    what = [
        "Static: both control states; operating point, then AC with 1 V behind each port's impedance in turn.",
        "S of ports i, j from the plots: 2 v(p_i) - (1 if i = j), "
        f"all ports at {format_quantity(netlist.ports[0].impedance, 'ohm')}.",
    ]
    steps = _excitations(netlist, netlist.ports, frequencies, "static.raw")
    loop = f"foreach level {deck_number(control.low)} {deck_number(control.high)}"
    body = ["  alter vcontrol dc = $level", "  op", "  write static.raw all", *steps]
    script = "\n".join(control_block(["listing expand", loop, *body, "end"]))
    text = (
        deck_head("static", origin, what, True)
        + netlist.text
        + f"Vcontrol ctl 0 DC {deck_number(control.low)}\n"
        + quiet_ports(netlist.ports)
        + option_cards(numerics, origin.temperature, "gear")
        + script
        + "\n.end\n"
    )
    return Deck("static", text, writes_raw=True)


def video_deck(
    netlist: Netlist,
    control: Control,
    timeline: Timeline,
    numerics: Numerics,
    origin: Origin,
    saved: Sequence[str] = (),
) -> Deck:
    """Write the deck of the control pulse without RF.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    timeline : Timeline
        Times of the command.
    numerics : Numerics
        Tolerance and step limit.
    origin : Origin
        For the head.
    saved : sequence of str
        Device vectors to save beside all node voltages and branch currents.

    Returns
    -------
    Deck
    """
    what = ["Video: control pulse on, RF sources off; transient. Leakage is the voltage at the RF ports."]
    text = (
        deck_head("video", origin, what, False)
        + netlist.text
        + _command(control, timeline)
        + quiet_ports(netlist.ports)
        + option_cards(numerics, origin.temperature, "gear")
        + _transient(netlist, timeline, numerics, saved)
        + ".end\n"
    )
    return Deck("video", text, writes_raw=False, stop=timeline.stop)


def _transient(netlist: Netlist, timeline: Timeline, numerics: Numerics, saved: Sequence[str]) -> str:
    """Return the cards of the control pulse: what is saved, steps and stop."""
    step = timeline.on_for / numerics.steps
    return (
        f".save all {' '.join(dict.fromkeys((*netlist.saved, *saved)))}".rstrip()
        + f"\n.tran {deck_number(step)} {deck_number(timeline.stop)} 0 {deck_number(step)}\n"
    )


def point_deck(
    netlist: Netlist,
    control: Control,
    timeline: Timeline,
    frequencies: Sequence[float],
    numerics: Numerics,
    origin: Origin,
    saved: Sequence[str],
) -> Deck:
    """Write the deck of a study's point: what the static and the video deck find, in one process.

    Its raw file holds the transient of the control pulse, then, for the command low and then high, one AC plot for
    each port that RF enters and each frequency.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    timeline : Timeline
        Times of the command.
    frequencies : sequence of float
        Carriers [Hz].
    numerics : Numerics
        Tolerance and step limit.
    origin : Origin
        For the head.
    saved : sequence of str
        Device vectors to save beside all node voltages and branch currents.

    Returns
    -------
    Deck
    """
    what = [
        "Point of a study: control pulse on, RF sources off; transient. Then both control states: AC with 1 V behind",
        "the impedance of each port that RF enters. S of ports i, j: 2 v(p_i) - (1 if i = j), "
        f"all ports at {format_quantity(netlist.ports[0].impedance, 'ohm')}.",
    ]
    # the transient goes first, so that it starts from what it would start from in a deck of its own
    script = [
        "set filetype=binary",
        "listing expand",
        "run point.raw",
        "set appendwrite",
        f"foreach level {deck_number(control.low)} {deck_number(control.high)}",
        "  alter vcontrol dc = $level",
        *_excitations(netlist, [netlist.ports[place] for place in entered_ports(netlist)], frequencies, "point.raw"),
        "end",
        "quit 0",
    ]
    text = (
        deck_head("point", origin, what, True)
        + netlist.text
        + _command(control, timeline)
        + quiet_ports(netlist.ports)
        + option_cards(numerics, origin.temperature, "gear")
        + _transient(netlist, timeline, numerics, saved)
        + "\n".join([".control", *script, ".endc", ".end"])
        + "\n"
    )
    return Deck("point", text, writes_raw=True, stop=timeline.stop)


def entered_ports(netlist: Netlist) -> tuple[int, ...]:
    """Return the places of the ports that RF enters, in their order."""
    return tuple(sorted({throw.through[0] for throw in netlist.throws}))


def _excitations(netlist: Netlist, entered: Sequence[RfPort], frequencies: Sequence[float], raw: str) -> list[str]:
    """Return the commands of the AC analyses of one state: each port with 1 V behind its impedance in turn."""
    nodes = " ".join(f"v({port.node})" for port in netlist.ports)
    steps = []
    for port in entered:
        steps.append(f"  alter {port.source} acmag = 1")
        for frequency in frequencies:
            number = deck_number(frequency)
            steps += [f"  ac lin 1 {number} {number}", f"  write {raw} {nodes}"]
        steps.append(f"  alter {port.source} acmag = 0")
    return steps


@dataclass(frozen=True)
class Tone:
    """RF source of a carrier deck: frequency [Hz], amplitude behind the impedance [V], phase [deg], port's place."""

    frequency: float
    amplitude: float
    phase: float
    port: int


def _carrier_vectors(netlist: Netlist) -> list[str]:
    """Return what a carrier-resolved run saves: ports, bias, driver, and what tells of each junction."""
    nodes = {port.node: None for port in netlist.ports} | {"ctl": None}
    nodes |= {feed.entry: None for feed in netlist.feeds}
    nodes |= {node: None for place in netlist.junctions for node in place.nodes.values()}
    currents = [feed.ammeter for feed in netlist.feeds]
    currents += [name for place in netlist.junctions for name in place.ammeters.values()]
    voltages = [f"v({node})" for node in nodes if node != "0"]
    return [*voltages, *(f"i({name})" for name in currents), *netlist.saved]


def carrier_deck(
    netlist: Netlist, control: Control, timeline: Timeline, numerics: Numerics, origin: Origin, tone: Tone
) -> Deck:
    """Write a carrier-resolved deck.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    timeline : Timeline
        Times of the command.
    numerics : Numerics
        Tolerance and points per carrier period.
    origin : Origin
        For the head.
    tone : Tone
        The carrier; amplitude 0 gives the run without RF that is subtracted.

    Returns
    -------
    Deck
    """
    step = 1.0 / (tone.frequency * numerics.carrier_points)
    name = "carrier_quiet" if tone.amplitude == 0.0 else f"carrier_{tone.phase:.0f}"
    what = [
        f"Carrier: control pulse on, RF source at port {netlist.ports[tone.port].node} on at "
        f"{format_quantity(tone.frequency, 'Hz')}, {format_quantity(tone.amplitude, 'V')} peak behind its impedance, "
        f"cosine with a phase of {tone.phase:.0f} deg; transient, carrier resolved."
    ]
    sources = ""
    for k, port in enumerate(netlist.ports):
        drive = ""
        if k == tone.port:
            values = (0.0, tone.amplitude, tone.frequency, 0.0, 0.0, tone.phase + 90.0)
            drive = f" SIN({' '.join(map(deck_number, values))})"
        sources += f"{port.source} e{port.node} 0 DC 0{drive}\n"
    text = (
        deck_head(name, origin, what, False)
        + netlist.text
        + _command(control, timeline)
        + sources
        + option_cards(numerics, origin.temperature, "trap")
        + ".options vntol=1e-7 abstol=1e-10 chgtol=1e-17\n"
        + f".save {' '.join(_carrier_vectors(netlist))}"
        + f"\n.tran {deck_number(step)} {deck_number(timeline.stop)} 0 {deck_number(step)}\n.end\n"
    )
    return Deck(name, text, writes_raw=False, stop=timeline.stop)
