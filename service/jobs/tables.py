"""The one table of jobs, and the connection to the database that holds it."""

from pathlib import Path
from typing import Any

from sqlalchemy import (
    Column,
    Double,
    Engine,
    Index,
    Integer,
    MetaData,
    String,
    Table,
    Text,
    create_engine,
    event,
    make_url,
)
from sqlalchemy.exc import IntegrityError, ProgrammingError
from sqlalchemy.schema import CreateIndex, CreateTable

metadata = MetaData()

# JSON is kept as canonical text: it is compared, copied and served more often than it is read.
jobs = Table(
    "jobs",
    metadata,
    Column("id", String(36), primary_key=True),
    Column("process", String(64), nullable=False),
    Column("inputs", Text, nullable=False),
    Column("response", String(8), nullable=False),
    Column("outputs", Text, nullable=False),
    Column("digest", String(80), nullable=False),
    Column("state", String(16), nullable=False),
    Column("attempt", Integer, nullable=False, default=0),
    Column("owner", String(255)),
    Column("lease", Double),
    Column("progress", Integer, nullable=False, default=0),
    Column("message", Text, nullable=False),
    Column("partial", Text),
    Column("result", Text),
    Column("reusable", Integer, nullable=False, default=0),
    Column("failure", Text),
    Column("computed_by", String(36)),
    Column("created", Double, nullable=False),
    Column("started", Double),
    Column("finished", Double),
    Column("updated", Double, nullable=False),
    Column("expires", Double),
)
INDEXES = (
    Index("jobs_by_state", jobs.c.state, jobs.c.created),
    Index("jobs_by_digest", jobs.c.digest),
    Index("jobs_by_age", jobs.c.created, jobs.c.id),
    Index("jobs_by_expiry", jobs.c.expires),
)


def connect(url: str) -> Engine:
    """Open the database, and make the table where it is missing.

    Raises ``sqlalchemy.exc.SQLAlchemyError`` when the URL or the database cannot be used, OSError when
    the folder of a SQLite file cannot be made, ImportError when the driver is not installed.
    """
    stated = make_url(url)
    if stated.get_backend_name() == "sqlite":
        if stated.database:
            Path(stated.database).parent.mkdir(parents=True, exist_ok=True, mode=0o700)
        engine = create_engine(url, connect_args={"timeout": 15.0})
        event.listen(engine, "connect", _prepare_sqlite)
    else:
        engine = create_engine(url, pool_pre_ping=True)
    _make(engine, CreateTable(jobs, if_not_exists=True))
    for index in INDEXES:
        _make(engine, CreateIndex(index, if_not_exists=True))
    return engine


def _make(engine: Engine, element: CreateTable | CreateIndex) -> None:
    for last in (False, False, True):
        try:
            with engine.begin() as connection:
                connection.execute(element)
            return
        except (IntegrityError, ProgrammingError):
            # Services that start together: IF NOT EXISTS does not see what another is just making.
            if last:
                raise


def _prepare_sqlite(connection: Any, _record: Any) -> None:
    cursor = connection.cursor()
    # WAL with NORMAL survives kill -9 of the service without a disk flush per job.
    cursor.execute("PRAGMA journal_mode=WAL")
    cursor.execute("PRAGMA synchronous=NORMAL")
    cursor.close()
