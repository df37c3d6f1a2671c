"""The site-selection plan: which sites open, who serves whom, what stays unmet."""

from dataclasses import dataclass

import numpy as np

from ledgersolve.site_selection.case import Flags, Floats, Ints


@dataclass(frozen=True)
class Plan:
    """A plan for a case with m sites and n customers.

    Parameters
    ----------
    open
        Shape (m,): sites that run.
    site, customer, share
        Shape (k,) each: the deliveries; share of the customer's demand (0 < share <= 1) from the site.
        Sorted by customer, then site; no pair twice.
    unmet
        Shape (n,): share of the demand that stays unmet.
    """

    open: Flags
    site: Ints
    customer: Ints
    share: Floats
    unmet: Floats

    def open_codes(self, sites: tuple[str, ...]) -> list[str]:
        """Codes of the open sites in sheet order."""
        return [sites[j] for j in np.flatnonzero(self.open)]
