"""The file says itself at which migration it is; searches are found by their time.

Views and triggers are not told here: they are made anew after every upgrade.
"""

from __future__ import annotations

from alembic import op

revision = "0003"
down_revision = "0002"


def upgrade() -> None:
    """Add the index by time. The table schema_revision is made by whoever starts the upgrade."""
    op.create_index("search_asked_at", "search", ["asked_at"])
