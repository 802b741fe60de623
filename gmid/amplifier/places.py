"""The places of the amplifier and its forms: which transistor stands where."""

from __future__ import annotations

from dataclasses import dataclass

from gmid.errors import UnknownName, advise

INPUTS = ("n", "p")
OUTPUTS = ("plain", "cascoded")
SENSES = ("resistors", "followers", "pairs")


@dataclass(frozen=True)
class Place:
    """A place: one kind of transistor with its instances.

    Parameters
    ----------
    name : str
        Name of the place.
    like_pair : bool
        Whether its channel is that of the input pair.
    sides : tuple of str
        What the names of its instances end in; empty for the only one.
    meaning : str
        What it does.

    Examples
    --------
    >>> Place("pair", True, ("p", "n"), "input pair").instances
    ('pair_p', 'pair_n')
    """

    name: str
    like_pair: bool
    sides: tuple[str, ...]
    meaning: str

    @property
    def instances(self) -> tuple[str, ...]:
        """Names of its instances."""
        return tuple(f"{self.name}_{side}" for side in self.sides) or (self.name,)

    def polarity(self, input_pair: str) -> str:
        """Give its channel.

        Parameters
        ----------
        input_pair : {"n", "p"}
            Channel of the input pair.

        Returns
        -------
        str
            ``n`` or ``p``.
        """
        return input_pair if self.like_pair else {"n": "p", "p": "n"}[input_pair]


_BOTH = ("p", "n")

_ALL = (
    Place("pair", True, _BOTH, "input pair"),
    Place("tail", True, (), "current source of the input pair"),
    Place("load", False, _BOTH, "diode of the input pair"),
    Place("direct", False, _BOTH, "mirrors a load to the output of its own side"),
    Place("copy", False, _BOTH, "mirrors a load to the turn of the other side"),
    Place("turn", True, _BOTH, "diode that turns the copied current round"),
    Place("opposite", True, _BOTH, "mirrors a turn to the output of its side"),
    Place("control", True, _BOTH, "beside opposite, steered by the common-mode loop"),
    Place("direct_cascode", False, _BOTH, "cascode of direct"),
    Place("opposite_cascode", True, _BOTH, "cascode of opposite and control"),
    Place("follower", True, ("p", "n", "m"), "follower of an output, and one of vcm"),
    Place("follower_tail", True, ("p", "n", "m"), "current source of a follower"),
    Place("sense_pair", False, ("p", "n", "pm", "nm"), "compares an output with vcm"),
    Place("sense_tail", False, _BOTH, "current source of a sensing pair"),
    Place("error_pair", False, ("s", "m"), "pair of the error amplifier"),
    Place("error_tail", False, (), "current source of the error amplifier"),
    Place("error_load", True, ("s", "m"), "mirror of the error amplifier"),
    Place("bias_reference", True, (), "diode of the reference current"),
    Place("bias_mirror", True, (), "turns the reference to the other rail"),
    Place("bias_load", False, (), "diode of the other rail's current sources"),
    Place("bias_direct_feed", True, (), "feeds bias_direct"),
    Place("bias_direct", False, (), "diode that gives the gates of direct_cascode"),
    Place("bias_opposite_feed", False, (), "feeds bias_opposite"),
    Place("bias_opposite", True, (), "diode that gives the gates of opposite_cascode"),
)

PLACES = {place.name: place for place in _ALL}
"""Every place there is, by name."""

_CASCODED = (
    "direct_cascode", "opposite_cascode", "bias_direct_feed", "bias_direct",
    "bias_opposite_feed", "bias_opposite",
)  # fmt: skip


@dataclass(frozen=True)
class Variant:
    """One form of the topology.

    Parameters
    ----------
    input_pair : {"n", "p"}
        Channel of the input pair.
    output : {"plain", "cascoded"}
        Kind of output.
    common_mode_sense : {"resistors", "followers", "pairs"}
        How the outputs are sensed.

    Raises
    ------
    UnknownName
        If there is no such form.

    Examples
    --------
    >>> str(Variant("n", "plain", "resistors"))
    'n-input, plain, resistors'
    """

    input_pair: str = "n"
    output: str = "plain"
    common_mode_sense: str = "resistors"

    def __post_init__(self) -> None:
        for key, known in (
            ("input_pair", INPUTS), ("output", OUTPUTS), ("common_mode_sense", SENSES),
        ):  # fmt: skip
            if getattr(self, key) not in known:
                raise UnknownName(
                    f"{key} is {getattr(self, key)!r}.",
                    where=key,
                    hint=advise(str(getattr(self, key)), known),
                )

    @property
    def is_cascoded(self) -> bool:
        """Whether the outputs have cascodes."""
        return self.output == "cascoded"

    def __str__(self) -> str:
        return f"{self.input_pair}-input, {self.output}, {self.common_mode_sense}"


def list_places(variant: Variant) -> tuple[str, ...]:
    """List the places of a form, in the order of a sheet.

    Parameters
    ----------
    variant : Variant
        The form.

    Returns
    -------
    tuple of str
        Names of places.

    Examples
    --------
    >>> "direct_cascode" in list_places(Variant("n", "plain", "resistors"))
    False
    >>> len(list_places(Variant("p", "cascoded", "followers")))
    22
    """
    absent: set[str] = set() if variant.is_cascoded else set(_CASCODED)
    if variant.common_mode_sense != "followers":
        absent |= {"follower", "follower_tail"}
    if variant.common_mode_sense == "pairs":
        absent |= {"error_pair", "error_tail"}
    else:
        absent |= {"sense_pair", "sense_tail"}
    return tuple(name for name in PLACES if name not in absent)
