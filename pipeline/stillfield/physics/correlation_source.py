"""Text of `stillfield.physics.correlation_polynomials`: the terms of every variant written out as one expression.

Written out, a polynomial of forty terms takes forty multiplications and additions, which a compiler lays out for
several cells at once; worked off from a table it takes a multiple. After a change of the terms, write it anew::

    python -m stillfield.physics.correlation_source > pipeline/stillfield/physics/correlation_polynomials.py
"""

from __future__ import annotations

import sys
import textwrap
from collections.abc import Sequence
from typing import Any

from stillfield.physics.correlation import FROST_TERMS, LETTERS, VARIANTS

WIDTH = 118
_HEAD = '''"""The polynomials of the daily correlation, written out; made by `stillfield.physics.correlation_source`.

Each takes predictors ``x[letter][i]`` in the order of `stillfield.physics.correlation.LETTERS`, one coefficient a
term, and fills ``out[i]`` for i below `count`. One i is a number in compiled code, and a row of numbers in numpy.
"""

from __future__ import annotations

from typing import Any
'''

_TOLD = '''    """Variant {name!r}.

    Parameters
    ----------
    x : sequence of ndarray, each of shape (count, ...)
        Scaled predictors; those without a term may be None. [1]
    c : sequence of float, shape ({terms},)
        Coefficients, in the unit of the result.
    out : ndarray, shape (count, ...)
        Filled with the sum of the terms.
    count : int
        How many numbers or rows to fill, from the first on.
    """'''


def source() -> str:
    """Write the module.

    Returns
    -------
    str
    """
    names = {**VARIANTS, "frost": FROST_TERMS}
    functions = [function(name, terms) for name, terms in names.items()]
    entries = ", ".join(f'"{name}": {_identifier(name)}' for name in names)
    table = "\n".join(["#: By the name of the variant.", "POLYNOMIALS = {", *_wrapped(entries, 4), "}"])
    return "\n\n".join([_HEAD, *(text + "\n" for text in functions), table]) + "\n"


def function(name: str, terms: Sequence[str]) -> str:
    """Write the polynomial of some terms.

    Parameters
    ----------
    name : str
        Of the variant.
    terms : sequence of str
        Products of predictors, '1' for the constant.

    Returns
    -------
    str

    Examples
    --------
    >>> for line in function("small", ("1", "S", "ST")).splitlines()[-10:]:
    ...     print(line)
        c_1, c_S, c_ST = (
            c[0], c[1], c[2],
        )
        for i in range(count):
            S, T = (
                x[0][i], x[1][i],
            )
            out[i] = (
                c_1 + S * (c_S + T * c_ST)
            )
    """
    used = [letter for letter in LETTERS if any(letter in term for term in terms)]
    picked = ", ".join(f"x[{LETTERS.index(letter)}][i]" for letter in used) + ","
    return "\n".join([
        f"def {_identifier(name)}(x: Any, c: Any, out: Any, count: int) -> None:",
        _TOLD.format(name=name, terms=len(terms)),
        *_assigned([f"c_{term}" for term in terms], ", ".join(f"c[{k}]" for k in range(len(terms))) + ",", 4),
        "    for i in range(count):",
        *_assigned(used, picked, 8),
        "        out[i] = (", *_wrapped(_expression(_tree(terms)), 12), "        )",
    ])


def _identifier(name: str) -> str:
    return name.replace("-", "_")


def _tree(terms: Sequence[str]) -> dict[str, Any]:
    """Terms by their letters: each letter leads on; the empty one to the name of a coefficient."""
    root: dict[str, Any] = {}
    for term in terms:
        node = root
        for letter in term.replace("1", ""):
            node = node.setdefault(letter, {})
        node[""] = f"c_{term}"
    return root


def _expression(node: dict[str, Any]) -> str:
    """Horner's form: what begins with the same letter is added up before it is multiplied."""
    parts = [node[""]] if "" in node else []
    for letter, rest in node.items():
        if letter:
            inner = _expression(rest)
            parts.append(f"{letter} * ({inner})" if " " in inner else f"{letter} * {inner}")
    return " + ".join(parts)


def _assigned(names: Sequence[str], values: str, indent: int) -> list[str]:
    space = " " * indent
    left = _wrapped(", ".join(names), indent + 4)
    head = [f"{space}{left[0].strip()} = ("] if len(left) == 1 else [f"{space}(", *left, f"{space}) = ("]
    return [*head, *_wrapped(values, indent + 4), f"{space})"]


def _wrapped(text: str, indent: int) -> list[str]:
    space = " " * indent
    return textwrap.wrap(text, WIDTH, initial_indent=space, subsequent_indent=space, break_on_hyphens=False)


if __name__ == "__main__":
    sys.stdout.write(source())
