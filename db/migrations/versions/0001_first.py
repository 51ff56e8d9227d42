"""The first schema. Nothing to do: a file that is older than any migration is at this one."""

revision = "0001"
down_revision = None


def upgrade() -> None:
    """Every store begins here."""
