# ruff: noqa: B018 - bare names are what the dead-code check reads
# ruff: noqa: F821 - likewise
"""Names that nothing in service/ calls, with who does: the dead-code check reads this file.

An entry without a true reason is dead code; delete the code instead. It is never run.
"""

_.create_system  # zipfile writes it into each entry
_.external_attr  # likewise
_.ready  # pydantic writes it into the answer of /readyz
