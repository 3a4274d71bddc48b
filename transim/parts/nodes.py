"""Which words of a SPICE card are nodes."""

from __future__ import annotations

import re

__all__ = ["GROUND", "least_nodes", "model_place", "nodes_of", "reads_as_element"]

#: Names of the reference node.
GROUND = ("0", "gnd")
#: Nodes of each element by its letter; for those with a model the least number, its name follows.
_NODES = {"r": 2, "c": 2, "l": 2, "v": 2, "i": 2, "b": 2, "f": 2, "h": 2, "w": 2, "d": 2, "t": 4, "s": 4, "k": 0}
_CONTROLLED = re.compile(r"(?i)\b(?:value|vol|cur|poly|table|laplace|freq)\b|[{'=]")
_NUMBER = re.compile(r"(?i)[-+]?(?:\d+\.?\d*|\.\d+)(?:e[-+]?\d+)?[a-z]*")


def nodes_of(text: str, models: frozenset[str] = frozenset()) -> tuple[str, ...]:
    """Return the nodes at which an element's card connects it.

    Parameters
    ----------
    text : str
        The card on one line.
    models : frozenset of str
        Names of the models in lower case, which tell where the nodes of a transistor end.

    Returns
    -------
    tuple of str
        In lower case, in the card's order; none for a dot card. Nodes that only an expression names are left out.
    """
    letter = text[:1].lower()
    words = _words(text) if letter.isalpha() else []
    if not words:
        return ()
    if letter == "x":
        return tuple(words[1:-1])
    if letter in "eg":
        two = _CONTROLLED.search(text) is not None and len(words) < 6
        return tuple(words[1 : 3 if two or _CONTROLLED.search(" ".join(words[3:5])) else 5])
    if letter in "qmjz":
        return tuple(words[1 : model_place(words, models)])
    return tuple(words[1 : 1 + _NODES.get(letter, 2)])


def least_nodes(letter: str) -> int:
    """Return the least number of nodes that an element has, by its letter."""
    lower = letter.lower()
    return {"q": 3, "m": 3, "j": 3, "z": 3, "x": 1, "e": 2, "g": 2}.get(lower, _NODES.get(lower, 2))


def model_place(words: list[str], models: frozenset[str]) -> int:
    """Return the place of the model's name among the words of a transistor's card."""
    least = 5 if words[0][0] == "m" else 4
    named = [place for place in range(least, len(words)) if words[place] in models]
    # VDMOS has three nodes where other MOSFETs have four
    if words[0][0] == "m" and len(words) > 4 and words[4] in models:
        return 4
    return named[0] if named else min(least, len(words))


def _words(text: str) -> list[str]:
    """Return the words before the first name=value, parentheses and commas around nodes as blanks."""
    plain = re.sub(r"\s*=\s*", "=", text.lower())
    if plain[0] in "egfhk":
        plain = re.sub(r"[(),]", " ", plain)
    words: list[str] = []
    for word in plain.split():
        if "=" in word or word == "params:":
            break
        words.append(word)
    return words


def reads_as_element(text: str) -> bool:
    """Tell whether a line has the form of an element, so that it is no certain title.

    Parameters
    ----------
    text : str
        The line.

    Returns
    -------
    bool
        Whether letter, number of words and a value where one is due are those of an element.
    """
    words = text.lower().split()
    letter = words[0][0]
    if letter not in "bcdefghijklmqrstvwxz" or len(words) < 3:
        return False
    if letter in "rcl":
        return len(words) > 3 and (_NUMBER.fullmatch(words[3]) is not None or words[3][0] in "{'" or "=" in words[3])
    if letter in "vi":
        return len(words) == 3 or _NUMBER.fullmatch(words[3]) is not None or words[3].partition("(")[0] in (
            "dc", "ac", "sin", "pulse", "pwl", "exp", "sffm", "am",
        )  # fmt: skip
    if letter == "b":
        return len(words) > 3 and words[3][0] in "vi" and "=" in text
    if letter == "x":
        return all(re.fullmatch(r"[\w.:=+{}'-]+", word) for word in words) and len(words) > 2
    return len(words) > 3 and all(re.fullmatch(r"[\w.#():=+{}',/*-]+", word) for word in words)
