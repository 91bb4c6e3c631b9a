"""The general limit of unwanted emissions: Recommendation ITU-R SM.329, category A.

Category A asks that every spurious emission be attenuated below the power supplied to the antenna's line by
43 + 10 log10 P dB, P in watts, or by 70 dB, whichever is less stringent. The first is −13 dBm whatever the power; the
second takes over from 500 W. It holds for all services but those that the recommendation lists with values of their
own (space services, radiodetermination, broadcasting, amateurs and others), and beyond 250 % of the necessary bandwidth
from the carrier. A single line lies in one reference bandwidth whole, so its level is what is compared.

References
----------
.. [1] Recommendation ITU-R SM.329, "Unwanted emissions in the spurious domain", table 2, category A: "all services
   except those services quoted below" (memory).
"""

from __future__ import annotations

_OFFSET_DB = 43.0
_MOST_DB = 70.0


def sm329_category_a_db(power_dbm: float) -> float:
    """Return the attenuation below the carrier that category A asks for [dB].

    Parameters
    ----------
    power_dbm : float
        Power of the carrier [dBm].

    Returns
    -------
    float
        Negative for a carrier below −13 dBm, of which nothing is asked.
    """
    watts_db = power_dbm - 30.0
    return min(_OFFSET_DB + watts_db, _MOST_DB)
