"""What a run works out once in a process; the server that forks children imports this, and they find it done."""

from driftbook.store import migrate
from driftbook.store.sql import query
from driftbook.store.tables import columns_at

query("tables_of")
columns_at(migrate.newest())
