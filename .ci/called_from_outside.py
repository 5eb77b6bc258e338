# ruff: noqa: B018 - bare names are what the dead-code check reads
# ruff: noqa: F821 - likewise
"""Names that nothing in service/ calls, with who does: the dead-code check reads this file.

An entry without a true reason is dead code; delete the code instead. It is never run.
"""

_.create_system  # zipfile writes it into each entry
_.external_attr  # likewise
_.ready  # pydantic writes it into the answer of /readyz
_.isolation_level  # the SQLite driver reads it
_.type_annotation_map  # SQLAlchemy reads it from the declarative base
_.impl  # SQLAlchemy reads it from a column type
_.cache_ok  # likewise
_.load_dialect_impl  # SQLAlchemy calls it on a column type
_.process_bind_param  # likewise
_.process_result_value  # likewise
ConnectionPoolEntry  # imported for a quoted annotation, which the check does not read
Table  # likewise
_.pids  # tests/engine watches the processes
downgrade_database  # tests/store undoes every migration
service_role_sql  # operators of PostgreSQL run it, as its module says
NUMBERS_TOO_LARGE  # a planning child answers with its value
_.size_bytes  # tests/unit/network look at it
_.extract_id  # pydantic checks it; it stays with the body as received
_.extracted_at  # likewise
usable_lanes_of_one  # planning/memory.py takes it out of a document by its name
sharing_lanes  # likewise
Format  # imported for a quoted annotation
Worksheet  # likewise
_.writeable  # NumPy reads it: nobody may change what a digest is known of
stored_zip  # tests look at the bytes of a zip without a file
