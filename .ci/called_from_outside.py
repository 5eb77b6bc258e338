"""Names that nothing in service/ calls, with who does: the dead-code check reads this file.

An entry without a true reason is dead code; delete the code instead.
"""
