"""How much work one equilibrium may take, counted and never timed.

The same request is answered or refused on every machine and under every load.
"""

from __future__ import annotations

from dataclasses import dataclass

from core.errors import Subject, refuse

MOST_WORK = 1e9
"""Multiplications, about: less than two seconds."""
CALL = 1.2e5
"""What a step of any kind takes that does not hang on how many samples take it."""


@dataclass(eq=False)
class Budget:
    """What is left of it; of one problem.

    Attributes
    ----------
    left : float
        Multiplications, about.
    subject : Subject
        What a refusal is about.
    """

    left: float = MOST_WORK
    subject: Subject = ()

    def spend(self, work: float) -> None:
        """Count some work.

        Raises
        ------
        Refused
            ``compute-budget``, when there is no more left.
        """
        self.left -= work + CALL
        if self.left < 0:
            raise refuse(
                "compute-budget",
                self.subject,
                "this equilibrium takes more work than one request may. Ask for fewer points of"
                " the sweep, hold the temperature, take the gas as ideal, or leave out reactions"
                " and substances that do not matter",
            )


def work_of_state(samples: int, substances: int) -> float:
    """Return what an equation of state takes."""
    return float(samples * (2 * substances**2 + 50 * substances + 500) + 3 * CALL)
