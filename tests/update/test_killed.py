"""kill -9 anywhere in an update: run again, it ends as an undisturbed one, nothing lost, nothing doubled.

The places are the calls that leave something on disk: each commit of the store, each file written, renamed
or removed, before and after the call. A forked child installs the counter, runs the update and kills itself
at the chosen place; a second child runs the update again.
"""

from __future__ import annotations

import hashlib
import os
import signal
import traceback
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

import treering.store.repo as repo
import treering.update.weekly  # noqa: F401  (loaded before the forks, so that each child starts warm)

DAYS = ("2026-01-05", "2026-01-12")


def lay_out(review: Any) -> None:
    """Two updates: a base version, then a week with a crossing, a bad file and a double."""
    for trial, counts in (("T1", (24, 110, 33, 108)), ("T2", (30, 140, 41, 138))):
        review.drop_pair(trial, counts)
    review.update(DAYS[0])
    review.drop_pair("Large", (150, 800, 230, 800))
    review.drop("again.json", review.extraction("T1", "AA", (24, 110, 33, 108)))
    review.drop("bad.json", "{")


def instrument(places: Callable[[], None]) -> None:
    """Call `places` before and after every call that leaves something on disk."""

    def around(owner: Any, name: str) -> None:
        inner = getattr(owner, name)

        def outer(*args: Any, **kwargs: Any) -> Any:
            places()
            result = inner(*args, **kwargs)
            places()
            return result

        setattr(owner, name, outer)

    for name in ("rename", "replace", "write_bytes", "write_text", "mkdir"):
        around(Path, name)
    around(repo.EvidenceStore, "append")
    around(repo.reader, "write_batch")


def in_child(work: Callable[[], None]) -> int:
    """Run `work` in a forked child and return the signal that ended it; 0 for a clean end."""
    child = os.fork()
    if child == 0:
        status = 1
        try:
            work()
            status = 0
        except BaseException:
            traceback.print_exc()
        finally:
            os._exit(status)
    _, status = os.waitpid(child, 0)
    assert not os.WIFEXITED(status) or os.WEXITSTATUS(status) == 0, "the child failed"
    return os.WTERMSIG(status) if os.WIFSIGNALED(status) else 0


def killed_at(review: Any, place: int) -> bool:
    """Run the second update and kill it at a place; False when it has fewer places."""

    def work() -> None:
        count = 0

        def places() -> None:
            nonlocal count
            count += 1
            if count == place:
                os.kill(os.getpid(), signal.SIGKILL)

        instrument(places)
        review.update(DAYS[1])

    return in_child(work) == signal.SIGKILL


def outcome(review: Any) -> dict[str, Any]:
    """Return everything that must not depend on the kill: heads, notices, every file's digest."""
    with review.store() as store:
        head = store.head()
        heads = [(body["version"], body["root"]) for body in store.versions()]
        keys = [entry.key for entry in store.entries()]
    files = {
        str(path.relative_to(review.folder)): hashlib.sha256(path.read_bytes()).hexdigest()
        for part in ("reports", "intake")
        for path in sorted((review.folder / part).rglob("*"))
        if path.is_file()
    }
    return {"head": head, "heads": heads, "keys": keys, "files": files}


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory, review_class: Any) -> dict[str, Any]:
    review = review_class(tmp_path_factory.mktemp("undisturbed") / "review")
    lay_out(review)
    in_child(lambda: review.update(DAYS[1]))
    return outcome(review)


def killed_and_run_again(review: Any, place: int) -> bool:
    lay_out(review)
    killed = killed_at(review, place)
    if killed:
        in_child(lambda: review.update(DAYS[1]))
    return killed


@pytest.mark.parametrize("place", [3, 7, 12, 16, 22, 30])
def test_an_update_killed_and_run_again_ends_as_an_undisturbed_one(
    review: Any, place: int, undisturbed: dict[str, Any]
) -> None:
    assert killed_and_run_again(review, place)
    assert outcome(review) == undisturbed


@pytest.mark.slow
def test_every_place_of_an_update_can_be_killed(
    make_review: Callable[..., Any], undisturbed: dict[str, Any]
) -> None:
    place = 1
    while True:
        review = make_review(name=f"killed-{place}")
        killed = killed_and_run_again(review, place)
        assert outcome(review) == undisturbed, f"place {place}"
        if not killed:
            break
        place += 1
    assert place > 40, "fewer places than expected: the counter misses calls"
