"""Running the revisions: when a store is made, and when an older one is upgraded."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection


def shipped(name: str) -> Path:
    """Return a folder that lies beside the package in the checkout, inside it in an installed wheel."""
    package = Path(__file__).parent.parent
    inside = package / f"_{name}"
    return inside if inside.is_dir() else package.parent / name


def run_revisions(connection: Connection, *, to: str = "head") -> None:
    """Bring the open store to a revision, inside the transaction of `connection`."""
    from alembic import command
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", str(shipped("migrations")).replace("%", "%%"))
    config.attributes["connection"] = connection
    command.upgrade(config, to)
