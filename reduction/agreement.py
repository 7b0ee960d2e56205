"""Whether two methods agree on one particle: difference, its uncertainty with what they share, and E_n."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.floating[Any]]
QUANTITIES = (("charge_to_mass", "C/kg"), ("drag_rate", "1/s"))


@dataclass(frozen=True)
class MethodEstimate:
    """What one method alone says of one particle, in logarithms of charge-to-mass ratio and drag rate.

    `value` (2,) signed, SI; `private` (2,) standard uncertainty of the logarithms from the readings; `by_input` (2, K)
    components of the logarithms by shared input; `known` (2,) whether each is determined; `signed` whether the method
    tells the sign.
    """

    value: Array
    private: Array
    by_input: Array
    known: NDArray[np.bool_]
    signed: bool
    u_origin: float = float("nan")  # of the height origin, m, inputs included

    @property
    def u(self) -> Array:
        """Standard uncertainty, SI, (2,)."""
        spread: Array = np.sqrt(self.private**2 + (self.by_input**2).sum(axis=1))
        return np.abs(self.value) * spread


def normalized_error(difference: float, u_difference: float) -> float:
    """E_n = difference / (2 u), the difference over its expanded uncertainty with k = 2 (ISO/IEC 17043)."""
    return difference / (2.0 * u_difference)


def agreement_rows(session: str, particle: str, estimates: Mapping[str, MethodEstimate]) -> Iterator[dict[str, object]]:
    """Rows of agreement.csv: every pair of methods that each determine a quantity by themselves.

    u of the difference takes the covariance of shared inputs along: components are subtracted before they are squared.
    A method that tells no sign is compared by size.
    """
    for (name_a, a), (name_b, b) in combinations(estimates.items(), 2):
        for place, (quantity, unit) in enumerate(QUANTITIES):
            if not (a.known[place] and b.known[place]):
                continue
            values = np.array([a.value[place], b.value[place]])
            if not (a.signed and b.signed):
                values = np.abs(values)
            parts = values[:, None] * np.stack([a.by_input[place], b.by_input[place]])
            u = float(
                np.sqrt(
                    ((parts[0] - parts[1]) ** 2).sum()
                    + (values[0] * a.private[place]) ** 2
                    + (values[1] * b.private[place]) ** 2
                )
            )
            difference = float(values[0] - values[1])
            yield {
                "session": session,
                "particle": particle,
                "method_a": name_a,
                "method_b": name_b,
                "quantity": quantity,
                "difference": difference,
                "u_difference": u,
                "unit": unit,
                "normalized_error": normalized_error(difference, u),
            }
