"""Write the table of ``core/substances/atomic_weights.py`` from a reference library.

periodictable carries the abridged standard atomic weights of the CIAAW report
with the uncertainty that fixes how many decimals are printed. It gives nuclides
without a standard weight an uncertainty of zero; those are left out here.

Run from the root of the repository; the table goes to standard output::

    python tests/tables/build_atomic_weights.py
"""

import math
import sys

import periodictable


def decimals(value: float, uncertainty: float) -> int:
    """Decimals that the report prints: those of the uncertainty's first digit, or more."""
    held = len(repr(value).partition(".")[2])
    return max(held, -math.floor(math.log10(uncertainty)))


def weights_text() -> str:
    """Lines of the dictionary of standard atomic weights, in order of atomic number."""
    lines = []
    for element in periodictable.elements:
        uncertainty = element._mass_unc
        if element.number and uncertainty > 0:
            value = f"{element.mass:.{decimals(element.mass, uncertainty)}f}"
            lines.append(f'    "{element.symbol}": "{value}",\n')
    return "".join(lines)


def without_weight() -> tuple[str, ...]:
    """Symbols of the elements that have no standard atomic weight."""
    return tuple(e.symbol for e in periodictable.elements if e.number and e._mass_unc == 0)


if __name__ == "__main__":
    sys.stdout.write(weights_text())
    sys.stdout.write(" ".join(without_weight()) + "\n")
