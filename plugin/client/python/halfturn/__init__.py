# SPDX-License-Identifier: Apache-2.0
"""Client of the Halfturn daemon: send scans, get pulse lengths.

    import halfturn
    with halfturn.Client() as client:
        fit = client.fit(drive="red", duration_s=durations, counts=counts, shots=100)
        load(fit.lengths_s())  # always what to load: without a new proposal the lengths in force
        client.applied("red", pulses=fit.lengths_s())

All quantities are SI; a name ends in its unit. NumPy arrays and scalars may be given anywhere. A fit that is refused is no
exception: its `verdict` is "refuse" and its `reasons` say why. A client belongs to one thread.
"""
from ._client import Client, Feed, Results
from ._fitted import Fitted
from ._wire import HalfturnError, NoAnswer, RequestFault

__all__ = ["Client", "Feed", "Results", "Fitted", "HalfturnError", "NoAnswer", "RequestFault"]
__version__ = "0.1.0"
