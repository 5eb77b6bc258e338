"""What the files are called that the input check leaves in its folder, and planning reads there."""

from typing import Final

RECEIVED_FILE: Final = "received"
"""The body as it was sent, unpacked."""

NETWORK_FILE: Final = "network.zip"
"""The network in normal form."""

INTAKE_FILE: Final = "intake.json"
"""The summary: counts, digests, cautions, and what was set aside."""
