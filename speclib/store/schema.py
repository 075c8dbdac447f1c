"""Version-1 tables of the library, as SQL and as a description of what the audit trail records of each row.

Every audited row is known by a *row key* that is stable across libraries: its `uid`, or natural key columns in which
local ids are replaced by the keys of the rows they point to. Rows are never deleted; peaks and structures never change
(triggers).
"""

from __future__ import annotations

from dataclasses import dataclass, field

APPLICATION_ID = 0x53504C42
"""Marks the file as a speclib library in the SQLite header."""
SCHEMA_VERSION = 1
LOCAL_IDS = range(1, 2**63)
"""Numbers that a row can have; SQLite cannot even be asked for others."""


def is_storable(text: str) -> bool:
    """Whether a text is valid Unicode: a file name with bytes that could not be decoded is not."""
    try:
        text.encode()
    except UnicodeEncodeError:
        return False
    return True


@dataclass(frozen=True)
class Table:
    """One audited table: its DDL body, the columns of its row key, and which columns point to which table."""

    name: str
    body: str
    key: tuple[str, ...] = ("uid",)
    references: dict[str, str] = field(default_factory=dict)
    columns: tuple[str, ...] = ()
    indexes: tuple[str, ...] = ()


def _table(
    name: str,
    body: str,
    *,
    key: tuple[str, ...] = ("uid",),
    references: dict[str, str] | None = None,
    indexes: tuple[str, ...] = (),
) -> Table:
    columns = tuple(
        line.split()[0]
        for line in (part.strip() for part in body.strip().splitlines())
        if line and not line.startswith(("CHECK", "UNIQUE", "--", "OR ", "AND "))
    )
    return Table(name, body, key, references or {}, columns, indexes)


_ID = "id INTEGER PRIMARY KEY"

AUDITED: tuple[Table, ...] = (
    _table(
        "library",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        created TEXT NOT NULL,
        four_eyes INTEGER NOT NULL DEFAULT 0 CHECK (four_eyes IN (0, 1)),
        CHECK (id = 1)
        """,
    ),
    _table(
        "structures",
        f"""
        {_ID},
        smiles TEXT NOT NULL UNIQUE,
        inchikey TEXT,
        skeleton TEXT,
        formula TEXT NOT NULL,
        nominal_mass INTEGER NOT NULL CHECK (nominal_mass > 0),
        exact_mass REAL NOT NULL CHECK (exact_mass > 0)
        """,
        key=("smiles",),
        indexes=("inchikey", "skeleton, nominal_mass"),
    ),
    _table(
        "compounds",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        name TEXT NOT NULL COLLATE NOCASE,
        cas TEXT,
        formula TEXT,
        structure_id INTEGER REFERENCES structures(id),
        parent_id INTEGER REFERENCES compounds(id),
        derivative TEXT,
        rev INTEGER NOT NULL DEFAULT 1,
        CHECK (length(name) > 0)
        """,
        references={"structure_id": "structures", "parent_id": "compounds"},
        indexes=("name", "structure_id", "parent_id", "cas"),
    ),
    _table(
        "compound_names",
        f"""
        {_ID},
        compound_id INTEGER NOT NULL REFERENCES compounds(id),
        kind TEXT NOT NULL CHECK (kind IN ('name', 'synonym', 'class')),
        name TEXT NOT NULL COLLATE NOCASE,
        UNIQUE (compound_id, kind, name)
        """,
        key=("compound_id", "kind", "name"),
        references={"compound_id": "compounds"},
        indexes=("name",),
    ),
    _table(
        "sources",
        f"""
        {_ID},
        file_name TEXT NOT NULL,
        sha256 TEXT NOT NULL CHECK (length(sha256) = 64),
        reader TEXT NOT NULL,
        read_at TEXT NOT NULL,
        UNIQUE (sha256, file_name)
        """,
        key=("sha256", "file_name"),
        indexes=("file_name",),
    ),
    _table(
        "phases",
        f"""
        {_ID},
        name TEXT NOT NULL UNIQUE,
        chemistry TEXT NOT NULL
        """,
        key=("name",),
    ),
    _table(
        "methods",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        name TEXT NOT NULL UNIQUE COLLATE NOCASE,
        instrument TEXT,
        column_name TEXT,
        phase_id INTEGER REFERENCES phases(id),
        programme TEXT,
        rev INTEGER NOT NULL DEFAULT 1
        """,
        references={"phase_id": "phases"},
    ),
    _table(
        "ladders",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        method_id INTEGER NOT NULL REFERENCES methods(id),
        valid_from TEXT NOT NULL,
        kind TEXT NOT NULL,
        rev INTEGER NOT NULL DEFAULT 1
        """,
        references={"method_id": "methods"},
        indexes=("method_id",),
    ),
    _table(
        "ladder_points",
        f"""
        {_ID},
        ladder_id INTEGER NOT NULL REFERENCES ladders(id),
        carbon_number INTEGER NOT NULL CHECK (carbon_number > 0),
        time_s REAL NOT NULL CHECK (time_s >= 0),
        UNIQUE (ladder_id, carbon_number)
        """,
        key=("ladder_id", "carbon_number"),
        references={"ladder_id": "ladders"},
    ),
    _table(
        "spectra",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        role TEXT NOT NULL CHECK (role IN ('reference', 'unknown', 'consensus')),
        status TEXT CHECK (status IN ('provisional', 'confirmed', 'withdrawn')),
        compound_id INTEGER REFERENCES compounds(id),
        source_id INTEGER REFERENCES sources(id),
        source_index INTEGER NOT NULL DEFAULT 1 CHECK (source_index >= 1),
        mz BLOB NOT NULL,
        intensity BLOB NOT NULL,
        peak_count INTEGER NOT NULL CHECK (peak_count > 0),
        content_hash TEXT NOT NULL CHECK (length(content_hash) = 64),
        mass_accuracy TEXT NOT NULL CHECK (mass_accuracy IN ('unit', 'accurate')),
        mz_from REAL,
        mz_to REAL,
        molecular_mass INTEGER,
        retention_time_s REAL,
        retention_index REAL,
        phase_id INTEGER REFERENCES phases(id),
        method_id INTEGER REFERENCES methods(id),
        ladder_id INTEGER REFERENCES ladders(id),
        acquisition TEXT NOT NULL CHECK (json_valid(acquisition)),
        raw_fields TEXT NOT NULL CHECK (json_valid(raw_fields)),
        rev INTEGER NOT NULL DEFAULT 1,
        CHECK ((role = 'unknown') = (compound_id IS NULL)),
        CHECK ((role = 'reference') = (status IS NOT NULL)),
        CHECK (length(mz) = 8 * peak_count AND length(intensity) = 8 * peak_count)
        """,
        references={
            "compound_id": "compounds",
            "source_id": "sources",
            "phase_id": "phases",
            "method_id": "methods",
            "ladder_id": "ladders",
        },
        indexes=("content_hash", "compound_id, status", "source_id", "molecular_mass"),
    ),
    _table(
        "consensus_members",
        f"""
        {_ID},
        consensus_id INTEGER NOT NULL REFERENCES spectra(id),
        spectrum_id INTEGER NOT NULL REFERENCES spectra(id),
        used INTEGER NOT NULL CHECK (used IN (0, 1)),
        UNIQUE (consensus_id, spectrum_id)
        """,
        key=("consensus_id", "spectrum_id"),
        references={"consensus_id": "spectra", "spectrum_id": "spectra"},
    ),
    _table(
        "sign_offs",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        spectrum_id INTEGER NOT NULL REFERENCES spectra(id),
        decision TEXT NOT NULL CHECK (decision IN ('confirmed', 'withdrawn')),
        analyst TEXT NOT NULL,
        standard TEXT,
        reason TEXT,
        imported INTEGER NOT NULL CHECK (imported IN (0, 1)),
        event_id INTEGER NOT NULL REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED
        """,
        references={"spectrum_id": "spectra", "event_id": "events"},
        indexes=("spectrum_id",),
    ),
    _table(
        "findings",
        f"""
        {_ID},
        spectrum_id INTEGER NOT NULL REFERENCES spectra(id),
        check_name TEXT NOT NULL,
        severity TEXT NOT NULL CHECK (severity IN ('note', 'doubt', 'fault')),
        peaks TEXT NOT NULL CHECK (json_valid(peaks)),
        reason TEXT NOT NULL,
        source TEXT NOT NULL,
        fingerprint TEXT NOT NULL,
        answer TEXT,
        answered_event INTEGER REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED,
        UNIQUE (spectrum_id, check_name, fingerprint)
        """,
        key=("spectrum_id", "check_name", "fingerprint"),
        references={"spectrum_id": "spectra", "answered_event": "events"},
    ),
    _table(
        "cases",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        spectrum_id INTEGER NOT NULL REFERENCES spectra(id),
        status TEXT NOT NULL CHECK (status IN ('open', 'resolved', 'abandoned')),
        resolution TEXT,
        identification_level INTEGER CHECK (identification_level BETWEEN 1 AND 4),
        settings TEXT NOT NULL CHECK (json_valid(settings)),
        library_state TEXT NOT NULL,
        rev INTEGER NOT NULL DEFAULT 1
        """,
        references={"spectrum_id": "spectra"},
        indexes=("spectrum_id",),
    ),
    _table(
        "calibrations",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        kind TEXT NOT NULL CHECK (kind IN ('search', 'carry')),
        measure TEXT NOT NULL,
        method_version TEXT NOT NULL,
        library_state TEXT NOT NULL,
        settings TEXT NOT NULL CHECK (json_valid(settings)),
        model TEXT NOT NULL CHECK (json_valid(model)),
        reliability TEXT NOT NULL CHECK (json_valid(reliability)),
        brier REAL,
        trials INTEGER NOT NULL,
        compounds INTEGER NOT NULL,
        event_id INTEGER NOT NULL REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED
        """,
        references={"event_id": "events"},
    ),
    _table(
        "assignments",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        spectrum_id INTEGER NOT NULL REFERENCES spectra(id),
        peak INTEGER NOT NULL CHECK (peak >= 0),
        case_id INTEGER REFERENCES cases(id),
        structure_id INTEGER REFERENCES structures(id),
        formula TEXT NOT NULL,
        neutral_loss TEXT,
        mechanism TEXT NOT NULL,
        parity TEXT NOT NULL CHECK (parity IN ('OE', 'EE')),
        atoms TEXT NOT NULL CHECK (json_valid(atoms)),
        steps TEXT NOT NULL CHECK (json_valid(steps)),
        isotope_of INTEGER REFERENCES assignments(id),
        origin TEXT NOT NULL CHECK (origin IN ('manual', 'explained', 'carried')),
        state TEXT NOT NULL CHECK (state IN ('proposed', 'refused', 'accepted', 'rejected', 'superseded')),
        accepted_how TEXT CHECK (accepted_how IN ('individually', 'by rule')),
        route TEXT CHECK (route IN ('same-ion', 'same-loss', 'part-shift')),
        confidence REAL CHECK (confidence BETWEEN 0 AND 1),
        calibration_id INTEGER REFERENCES calibrations(id),
        rules_version INTEGER NOT NULL,
        checks TEXT NOT NULL CHECK (json_valid(checks)),
        reason TEXT NOT NULL,
        superseded_by INTEGER REFERENCES assignments(id),
        rev INTEGER NOT NULL DEFAULT 1,
        CHECK ((origin = 'carried') = (route IS NOT NULL)),
        CHECK ((state = 'accepted') = (accepted_how IS NOT NULL))
        """,
        references={
            "spectrum_id": "spectra",
            "case_id": "cases",
            "structure_id": "structures",
            "isotope_of": "assignments",
            "calibration_id": "calibrations",
            "superseded_by": "assignments",
        },
        indexes=("spectrum_id, state", "case_id"),
    ),
    _table(
        "lineage",
        f"""
        {_ID},
        assignment_id INTEGER NOT NULL REFERENCES assignments(id),
        donor_uid TEXT NOT NULL,
        donor_id INTEGER REFERENCES assignments(id),
        route TEXT NOT NULL CHECK (route IN ('same-ion', 'same-loss', 'part-shift')),
        weight REAL NOT NULL CHECK (weight >= 0),
        UNIQUE (assignment_id, donor_uid, route)
        """,
        key=("assignment_id", "donor_uid", "route"),
        references={"assignment_id": "assignments", "donor_id": "assignments"},
        indexes=("donor_uid", "donor_id"),
    ),
    _table(
        "case_neighbours",
        f"""
        {_ID},
        case_id INTEGER NOT NULL REFERENCES cases(id),
        rank INTEGER NOT NULL CHECK (rank >= 1),
        spectrum_id INTEGER NOT NULL REFERENCES spectra(id),
        similarity REAL NOT NULL,
        probability REAL,
        detail TEXT NOT NULL CHECK (json_valid(detail)),
        UNIQUE (case_id, rank)
        """,
        key=("case_id", "rank"),
        references={"case_id": "cases", "spectrum_id": "spectra"},
        indexes=("spectrum_id",),
    ),
    _table(
        "flags",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        subject_uid TEXT NOT NULL,
        cause_uid TEXT NOT NULL,
        reason TEXT NOT NULL,
        opened_event INTEGER NOT NULL REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED,
        closed_event INTEGER REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED
        """,
        references={"opened_event": "events", "closed_event": "events"},
    ),
    _table(
        "releases",
        f"""
        {_ID},
        number INTEGER NOT NULL UNIQUE CHECK (number >= 1),
        uid TEXT NOT NULL UNIQUE,
        manifest_hash TEXT NOT NULL,
        chain_head TEXT NOT NULL,
        event_id INTEGER NOT NULL REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED
        """,
        references={"event_id": "events"},
    ),
    _table(
        "release_rows",
        f"""
        {_ID},
        release_id INTEGER NOT NULL REFERENCES releases(id),
        kind TEXT NOT NULL CHECK (kind IN ('compound', 'spectrum', 'assignment')),
        row_uid TEXT NOT NULL,
        record TEXT NOT NULL CHECK (json_valid(record)),
        record_hash TEXT NOT NULL,
        UNIQUE (release_id, kind, row_uid)
        """,
        key=("release_id", "kind", "row_uid"),
        references={"release_id": "releases"},
    ),
    _table(
        "tune_checks",
        f"""
        {_ID},
        uid TEXT NOT NULL UNIQUE,
        instrument TEXT NOT NULL,
        at TEXT NOT NULL,
        criteria TEXT NOT NULL,
        verdict TEXT NOT NULL,
        detail TEXT NOT NULL CHECK (json_valid(detail)),
        event_id INTEGER NOT NULL REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED
        """,
        references={"event_id": "events"},
    ),
)

TABLES: dict[str, Table] = {table.name: table for table in AUDITED}

TRAIL_SQL = """
CREATE TABLE events (
    id INTEGER PRIMARY KEY,
    library_uid TEXT NOT NULL,
    seq INTEGER NOT NULL CHECK (seq >= 1),
    at TEXT NOT NULL,
    analyst TEXT,
    action TEXT NOT NULL,
    reason TEXT,
    detail TEXT NOT NULL CHECK (json_valid(detail)),
    previous_hash TEXT NOT NULL,
    hash TEXT NOT NULL UNIQUE,
    UNIQUE (library_uid, seq)
) STRICT;
CREATE TABLE event_changes (
    id INTEGER PRIMARY KEY,
    event_id INTEGER NOT NULL REFERENCES events(id) DEFERRABLE INITIALLY DEFERRED,
    table_name TEXT NOT NULL,
    row_uid TEXT NOT NULL,
    before TEXT CHECK (before IS NULL OR json_valid(before)),
    after TEXT CHECK (after IS NULL OR json_valid(after))
) STRICT;
CREATE INDEX event_changes_row ON event_changes (table_name, row_uid);
CREATE INDEX event_changes_event ON event_changes (event_id);
CREATE TABLE changes (
    generation INTEGER PRIMARY KEY AUTOINCREMENT,
    spectrum_id INTEGER NOT NULL,
    operation TEXT NOT NULL CHECK (operation IN ('insert', 'update'))
) STRICT;
"""

EXTRA_INDEX_SQL = """
CREATE UNIQUE INDEX assignments_live ON assignments (spectrum_id, peak, formula, ifnull(case_id, 0))
    WHERE state IN ('proposed', 'accepted');
CREATE INDEX flags_open ON flags (subject_uid) WHERE closed_event IS NULL;
"""


def create_tables_sql() -> str:
    """DDL of all tables and indexes, without the triggers."""
    parts = [TRAIL_SQL]
    for table in AUDITED:
        parts.append(f"CREATE TABLE {table.name} ({table.body}) STRICT;")
        for columns in table.indexes:
            name = f"{table.name}_{columns.replace(', ', '_')}"
            parts.append(f"CREATE INDEX {name} ON {table.name} ({columns});")
    parts.append(EXTRA_INDEX_SQL)
    return "\n".join(parts)


_KEYS: dict[str, tuple[str, ...]] = {
    "events": ("library_uid", "seq"),
    "event_changes": ("id",),
    **{table.name: table.key for table in AUDITED},
}
"""Columns by which the trail knows the rows of every guarded table."""


def _held(name: str, key: tuple[str, ...]) -> str:
    same = " AND ".join(f"{column} = new.{column}" for column in key)
    return f"EXISTS (SELECT 1 FROM {name} WHERE {same})"  # noqa: S608 (names from this module)


def _moved(columns: tuple[str, ...]) -> str:
    # Binary, because the trail tells names apart that the table's collation does not.
    return " OR ".join(f"new.{column} COLLATE BINARY IS NOT old.{column}" for column in columns)


def trigger_names() -> list[str]:
    """Names of all triggers."""
    return [statement.split()[2] for statement in trigger_statements()]


def trigger_statements() -> list[str]:
    """All triggers, one list, because a table rebuild drops them silently: they are made anew after every migration.

    They guard against accidents of any program that writes to the file. `INSERT OR REPLACE` deletes without firing
    delete triggers, so that a row whose id or key is taken is refused before it comes in.
    """
    made = [
        f"CREATE TRIGGER {name}_never_deleted BEFORE DELETE ON {name} "
        f"BEGIN SELECT RAISE(ABORT, 'rows of {name} are never deleted'); END"
        for name in ("events", "event_changes", *TABLES)
    ]
    made += [
        f"CREATE TRIGGER {name}_never_changed BEFORE UPDATE ON {name} "
        f"BEGIN SELECT RAISE(ABORT, 'rows of {name} never change'); END"
        for name in (
            "events",
            "event_changes",
            "structures",
            "lineage",
            "sign_offs",
            "releases",
            "release_rows",
        )
    ]
    made += [
        f"CREATE TRIGGER {name}_never_replaced BEFORE INSERT ON {name} "
        f"WHEN {_held(name, ('id',))} OR {_held(name, key)} "
        f"BEGIN SELECT RAISE(ABORT, 'this row of {name} is held already'); END"
        for name, key in _KEYS.items()
    ]
    made += [
        f"CREATE TRIGGER {name}_key_never_changes BEFORE UPDATE ON {name} WHEN {_moved(('id', *key))} "
        f"BEGIN SELECT RAISE(ABORT, 'the key of a row of {name} never changes'); END"
        for name, key in _KEYS.items()
    ]
    made.append(
        "CREATE TRIGGER spectra_peaks_never_change BEFORE UPDATE OF mz, intensity, content_hash, peak_count ON spectra "
        "BEGIN SELECT RAISE(ABORT, 'peaks of a stored spectrum never change'); END"
    )
    made.append(
        "CREATE TRIGGER spectra_inserted AFTER INSERT ON spectra "
        "BEGIN INSERT INTO changes (spectrum_id, operation) VALUES (new.id, 'insert'); END"
    )
    made.append(
        "CREATE TRIGGER spectra_updated AFTER UPDATE OF role, status, compound_id, molecular_mass, mass_accuracy, "
        "mz_from, mz_to, retention_index, phase_id ON spectra "
        "BEGIN INSERT INTO changes (spectrum_id, operation) VALUES (new.id, 'update'); END"
    )
    return made
