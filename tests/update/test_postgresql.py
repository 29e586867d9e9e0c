"""The same weeks on SQLite and on PostgreSQL leave the same heads and the same report bytes."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from typing import Any

import pytest

from treering.errors import StoreError
from treering.update import weekly
from treering.update.auditing import audit_review


def weeks(review: Any) -> dict[str, Any]:
    """Play three weeks and return heads and digests of everything published."""
    for trial, counts in (("T1", (24, 110, 33, 108)), ("T2", (30, 140, 41, 138)), ("T3", (15, 80, 21, 82))):
        review.drop_pair(trial, counts)
    review.update("2026-01-05")
    review.drop_pair("Large", (150, 800, 230, 800))
    review.update("2026-01-12")
    review.drop_pair("T2", (30, 140, 44, 138), correction="erratum")
    review.update("2026-01-19")
    with review.store() as store:
        heads = [(body["version"], body["root"]) for body in store.versions()]
        head = store.head()
    files = {
        str(path.relative_to(review.folder)): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted((review.folder / "reports").rglob("*"))
        if path.is_file()
    }
    return {"heads": heads, "head": head, "files": files}


def test_both_databases_leave_the_same_heads_and_report_bytes(
    make_review: Callable[..., Any], postgres_url: str
) -> None:
    on_file = make_review(name="file")
    plan = (on_file.folder / "config" / "review.toml").read_text()
    on_server = make_review(name="server")
    on_server.write_plan(plan + f'\n[store]\nurl = "{postgres_url}"\n')
    on_file.write_plan(plan + "\n")
    assert weeks(on_file) == weeks(on_server)


def test_where_the_store_lies_stays_out_of_the_ledger(
    make_review: Callable[..., Any], postgres_url: str
) -> None:
    review = make_review()
    plan = (review.folder / "config" / "review.toml").read_text()
    review.write_plan(plan + f'\n[store]\nurl = "{postgres_url}"\n[delivery]\nsender = "a@example.org"\n')
    review.update("2026-01-05")
    with review.store() as store:
        text = store.state().get("protocol").body["text"]
    assert text == plan + "\n"


def test_the_whole_audit_of_a_review_on_a_server_holds(
    make_review: Callable[..., Any], postgres_url: str
) -> None:
    review = make_review()
    plan = (review.folder / "config" / "review.toml").read_text()
    review.write_plan(plan + f'\n[store]\nurl = "{postgres_url}"\n')
    review.drop_pair("T1", (24, 110, 33, 108))
    review.update("2026-01-05")
    checks = audit_review(review.folder)
    assert [(check.number, check.faults) for check in checks if not check.holds] == []
    assert [check.number for check in checks] == list(range(1, 12))


def test_a_server_restarted_in_an_update_stops_it_and_the_next_run_completes_it(
    make_review: Callable[..., Any], cluster: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    def on_server(name: str) -> Any:
        review = make_review(name=name)
        plan = (review.folder / "config" / "review.toml").read_text()
        review.write_plan(plan + f'\n[store]\nurl = "{cluster.fresh()}"\n')
        review.drop_pair("T1", (24, 110, 33, 108))
        review.drop_pair("T2", (30, 140, 41, 138))
        return review

    undisturbed, restarted = on_server("undisturbed"), on_server("restarted")
    undisturbed.update("2026-01-05")
    inner = weekly.step_basis

    def restart(context: Any) -> Any:
        cluster.stop()
        cluster.start()
        return inner(context)

    with monkeypatch.context() as patch:
        patch.setattr(weekly, "step_basis", restart)
        with pytest.raises(StoreError, match="lock of this update was lost"):
            restarted.update("2026-01-05")
    assert restarted.update("2026-01-05").version == 1
    with undisturbed.store() as one, restarted.store() as other:
        assert one.head() == other.head()
