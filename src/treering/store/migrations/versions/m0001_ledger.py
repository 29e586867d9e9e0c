"""The ledger, the typed tables, the tree's inner nodes, and the triggers that keep them append-only.

Revision ID: 0001
"""

import sqlalchemy as sa
from alembic import op

from treering.store.triggers import guard, refusal_function

revision = "0001"
down_revision = None

TYPES = {
    "text": sa.String,
    "whole": sa.BigInteger,
    "real": sa.Float,
    "truth": sa.Boolean,
    "json": sa.JSON,
}

# Columns as they were in the first release, "!" for those that must be given. Never to be edited: a store
# made by that release has them, and later migrations build on them.
TYPED = {
    "receipt": "file text, sha256 text!, size whole, record text",
    "study": (
        "trial text!, title text, registration json, randomised whole, design text, year whole, funding "
        "json, interests json"
    ),
    "report": "report text!, trial text, form text, citation text, published text, identifier json",
    "arm": "trial text!, arm text!, label text, side text, randomised whole",
    "outcome_definition": (
        "outcome text!, title text, measure text, better text, role text, unit text, window json"
    ),
    "extraction": (
        "trial text!, outcome text!, report text, extractor text!, values json, locators json, origins "
        "json, note text, correction text"
    ),
    "adjudication": (
        "trial text!, outcome text!, adjudicator text!, values json, locators json, reason_class text, "
        "reason text, unresolved truth"
    ),
    "verification": (
        "trial text!, outcome text!, basis text, extractors json, adjudicator text, extractions json, "
        "adjudication whole, fields whole, differences json, reread truth"
    ),
    "result": (
        "trial text!, outcome text!, report text, values json, locators json, verification text, "
        "subgroup json"
    ),
    "waiver": "trial text!, outcome text!, person text, reason text",
    "risk_of_bias": (
        "trial text!, outcome text!, report text, domains json, overall text, support json, assessors json"
    ),
    "certainty": "outcome text!, rating text, reasons json, raters json, version whole, numbers json",
    "integrity_notice": "trial text!, report text, notice text, link text, reason text, seen_by json",
    "search_run": (
        "source text!, date text, strategy text, strategy_sha256 text, hits whole, new_hits whole, error "
        "text, by text"
    ),
    "screening": "report text!, trial text, decision text, reason text, voters json",
    "ongoing": (
        "trial text!, registration json, planned whole, expected_end text, status text, outcomes json"
    ),
    "protocol": "digest text!, text text",
    "amendment": "date text!, author text, clauses json, reason text, results_seen truth",
    "look": (
        "synthesis text!, number whole!, date text, version whole, trials json, estimate real, "
        "standard_error real, information real, required real, fraction real, z real, p real, spends "
        "truth, alpha_spent real, boundary real, verdict text, plan_digest text"
    ),
    "analysis": (
        "synthesis text!, version whole, title text, measure text, scale text, role text, better text, "
        "unit text, k whole, participants real, events real, pooled json, common json"
    ),
    "version": (
        "version whole!, date text, previous json, causes json, protocol_digest text, code_version text, "
        "entries whole!, root text!"
    ),
    "release": "version whole!, files json",
    "run": "as_of text!, version whole, outcome json, returned json, waiting json",
    "notice": (
        "version whole, synthesis text, event text!, person text!, channel text, address text, subject "
        "text, text text"
    ),
    "delivery": "notice text!, person text, channel text, detail json",
    "acknowledgement": "notice text!, person text, date text",
    "panel_decision": (
        "recommendation text!, decision text, reason text, votes json, recusals json, date text"
    ),
    "withdrawal": "reason text!",
    "defect": "id text!, description text, versions json",
    "simulation": "outcome text!, plan_digest text!, reviews whole, seed whole, exceeds truth",
}


def upgrade() -> None:
    """Lay down all tables of the first release."""
    connection = op.get_bind()
    if connection.dialect.name == "postgresql":
        connection.exec_driver_sql(refusal_function())
    _ledger()
    guard(connection, "store", ("id",))
    guard(connection, "entry", ("seq",))
    guard(connection, "tree_node", ("level", "position"))
    for table, columns in TYPED.items():
        _typed(table, columns)
        guard(connection, table, ("entry",))


def _ledger() -> None:
    op.create_table(
        "store",
        sa.Column("id", sa.Integer, primary_key=True),
        sa.Column("review", sa.String, nullable=False),
        sa.Column("format", sa.Integer, nullable=False),
    )
    op.create_table(
        "entry",
        sa.Column("seq", sa.Integer, primary_key=True, autoincrement=False),
        *(
            sa.Column(name, sa.String, nullable=False)
            for name in ("kind", "key", "true_at", "known_at", "by")
        ),
        sa.Column("cause", sa.String),
        sa.Column("reason", sa.String),
        sa.Column("replaces", sa.Integer, sa.ForeignKey("entry.seq")),
        sa.Column("hash", sa.LargeBinary, nullable=False),
        sa.Column("canonical", sa.LargeBinary, nullable=False),
    )
    op.create_index("entry_key", "entry", ["key"])
    op.create_index("entry_replaces", "entry", ["replaces"], unique=True)
    op.create_table(
        "tree_node",
        sa.Column("level", sa.Integer, primary_key=True),
        sa.Column("position", sa.BigInteger, primary_key=True),
        sa.Column("hash", sa.LargeBinary, nullable=False),
    )


def _typed(table: str, columns: str) -> None:
    parts = [column.split() for column in columns.split(", ")]
    op.create_table(
        table,
        sa.Column("entry", sa.Integer, sa.ForeignKey("entry.seq"), primary_key=True, autoincrement=False),
        *(sa.Column(name, TYPES[kind.rstrip("!")](), nullable=kind[-1] != "!") for name, kind in parts),
    )
