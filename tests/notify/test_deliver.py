"""Notices reach people once, by file, mail or web, over real servers on loopback."""

from __future__ import annotations

import email
import email.policy
import socket

import pytest

from treering.notify import build_notices, deliver, deliver_pending, pending
from treering.protocol import Delivery, Panel

DAY = "2026-02-02"

# apprise loads all its plugins at once, one of them with a module that Python is about to drop
apprise_warns = pytest.mark.filterwarnings("ignore:'imghdr' is deprecated:DeprecationWarning")


@pytest.fixture
def stored(state, event, member):
    """Store the notice of one member and return it with the panel."""

    def put(person: str = "chair", **changes):
        panel = Panel(format=1, members=(member(person, **changes),))
        state.put(*build_notices([event()], panel, state))
        return pending(state)[-1], panel

    return put


def mail_settings(port: int) -> Delivery:
    return Delivery(smtp_host="127.0.0.1", smtp_port=port, sender="Review <review@example.org>")


def closed_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


# --- file ---


def test_a_file_notice_is_written_whole_under_a_fixed_name(stored, tmp_path) -> None:
    notice, _ = stored()
    sent = deliver(notice, Delivery(), tmp_path / "outbox", DAY)
    assert sent.entry.key == "delivery/notice/4/pain/boundary-crossed/chair"
    path = tmp_path / "outbox" / "notice-4-pain-boundary-crossed-chair.txt"
    assert sent.entry.body["detail"] == path.name
    assert path.read_text().startswith("Subject: Version 4: boundary crossed (Failed first attempt)\n\n")
    assert [p.name for p in path.parent.iterdir()] == [path.name]


def test_written_again_after_a_kill_it_is_the_same_file(stored, tmp_path) -> None:
    notice, _ = stored()
    first = deliver(notice, Delivery(), tmp_path, DAY)
    assert deliver(notice, Delivery(), tmp_path, DAY) == first
    assert len(list(tmp_path.iterdir())) == 1


def test_other_words_under_that_name_are_never_overwritten(stored, tmp_path) -> None:
    notice, _ = stored()
    path = tmp_path / "notice-4-pain-boundary-crossed-chair.txt"
    path.write_text("something else")
    sent = deliver(notice, Delivery(), tmp_path, DAY)
    assert sent.entry is None
    assert "is there with other words" in sent.failure
    assert path.read_text() == "something else"


def test_an_outbox_that_cannot_be_written_is_a_failure_in_words(stored, tmp_path) -> None:
    notice, _ = stored()
    (tmp_path / "outbox").write_text("a file in the way")
    assert "the outbox can't be written" in deliver(notice, Delivery(), tmp_path / "outbox", DAY).failure


# --- each to each person once ---


def test_each_notice_goes_out_once(state, event, panel, tmp_path) -> None:
    state.put(*build_notices([event()], panel, state))
    done = deliver_pending(state, Delivery(), tmp_path, DAY)
    assert [entry.body["person"] for entry in done.entries] == ["chair", "maker", "nurse"]
    state.put(*done.entries)
    assert deliver_pending(state, Delivery(), tmp_path, DAY).entries == ()


def test_one_that_fails_stops_no_other_and_stays_pending(stored, state, tmp_path) -> None:
    stored("chair", channel="webhook", address=f"http://127.0.0.1:{closed_port()}/SECRET")
    _, panel = stored("nurse")
    recorded: list = []
    done = deliver_pending(state, Delivery(), tmp_path, DAY, panel=panel, pause=0.001, record=recorded.append)
    assert [entry.body["person"] for entry in recorded] == ["nurse"]
    assert len(done.failures) == 1
    state.put(*done.entries)
    assert [notice.body["person"] for notice in pending(state)] == ["chair"]


# --- mail ---


def test_a_mail_arrives_with_a_message_id_of_its_own(stored, mailbox, tmp_path) -> None:
    notice, _ = stored(channel="email", address="chair@example.org")
    settings = mail_settings(mailbox.port)
    sent = deliver(notice, settings, tmp_path, DAY, environment={})
    again = deliver(notice, settings, tmp_path, DAY, environment={})
    assert sent == again
    first, second = (email.message_from_bytes(m.content, policy=email.policy.default) for m in mailbox.mails)
    assert first["Message-ID"] == second["Message-ID"] == sent.entry.body["detail"]
    assert first["Message-ID"].endswith("@example.org>")
    assert first["To"] == "chair@example.org"
    assert "benefit boundary crossed" in first.get_content()
    assert mailbox.mails[0].rcpt_tos == ["chair@example.org"]


def test_a_passing_refusal_is_tried_again_and_a_lasting_one_is_not(stored, mailbox, tmp_path) -> None:
    notice, _ = stored(channel="email", address="chair@example.org")
    settings = mail_settings(mailbox.port)
    mailbox.answers = ["451 later", "451 later"]
    assert deliver(notice, settings, tmp_path, DAY, environment={}, pause=0.001).entry is not None
    mailbox.answers = ["554 no", "unused"]
    failure = deliver(notice, settings, tmp_path, DAY, environment={}, pause=0.001).failure
    assert "the mail server answered 554" in failure
    assert mailbox.answers == ["unused"]


def test_a_mail_server_that_is_away_is_a_failure_after_three_attempts(stored, tmp_path) -> None:
    notice, _ = stored(channel="email", address="chair@example.org")
    settings = mail_settings(closed_port())
    failure = deliver(notice, settings, tmp_path, DAY, environment={}, pause=0.001).failure
    assert "could not be reached" in failure
    assert "3 attempts" in failure


def test_mail_without_server_or_password_says_what_to_set(stored, mailbox, tmp_path) -> None:
    notice, _ = stored(channel="email", address="chair@example.org")
    assert "Set smtp_host and sender" in deliver(notice, Delivery(), tmp_path, DAY).failure
    login = mail_settings(mailbox.port).model_copy(
        update={"smtp_user": "review", "smtp_password_variable": "REVIEW_PASSWORD"}
    )
    assert "REVIEW_PASSWORD" in deliver(notice, login, tmp_path, DAY, environment={}).failure


def test_an_address_cannot_smuggle_in_a_header(stored, mailbox, tmp_path) -> None:
    notice, _ = stored(channel="email", address="a@example.org\nBcc: b@example.org")
    assert "no mail address" in deliver(notice, mail_settings(mailbox.port), tmp_path, DAY).failure
    assert mailbox.mails == []


# --- web ---


def test_a_webhook_gets_json_with_an_idempotency_key(stored, hook, tmp_path) -> None:
    notice, panel = stored(channel="webhook", address=hook.url)
    sent = deliver(notice, Delivery(), tmp_path, DAY, panel=panel)
    deliver(notice, Delivery(), tmp_path, DAY, panel=panel)
    (headers, content), (again, _) = hook.posts
    assert content["notice"] == notice.key
    assert content["text"] == notice.body["text"]
    assert headers["Idempotency-Key"] == again["Idempotency-Key"]
    assert headers["Idempotency-Key"] in sent.entry.body["detail"]


def test_a_webhook_is_tried_again_while_the_server_fails(stored, hook, tmp_path) -> None:
    notice, panel = stored(channel="webhook", address=hook.url)
    hook.answers = [503, 429]
    assert deliver(notice, Delivery(), tmp_path, DAY, panel=panel, pause=0.001).entry is not None
    assert len(hook.posts) == 3


@pytest.mark.parametrize("status", [302, 404, 410])
def test_a_webhook_that_says_no_is_not_tried_again(stored, hook, tmp_path, status) -> None:
    notice, panel = stored(channel="webhook", address=hook.url)
    hook.answers = [status]
    assert f"answered {status}" in deliver(notice, Delivery(), tmp_path, DAY, panel=panel).failure
    assert len(hook.posts) == 1


@apprise_warns
@pytest.mark.parametrize("channel", ["webhook", "apprise"])
def test_no_failure_shows_the_secret_of_an_address(stored, hook, tmp_path, caplog, channel) -> None:
    caplog.set_level("DEBUG")
    hook.answers = [500] * 3
    address = hook.url if channel == "webhook" else "nothing://SECRET-TOKEN"
    notice, panel = stored(channel=channel, address=address)
    failure = deliver(notice, Delivery(), tmp_path, DAY, panel=panel, pause=0.001).failure
    assert failure
    assert "SECRET" not in failure
    assert "SECRET" not in caplog.text
    away = f"http://127.0.0.1:{closed_port()}/SECRET-TOKEN"
    other = Panel(format=1, members=(panel.members[0].model_copy(update={"address": away}),))
    assert "SECRET" not in deliver(notice, Delivery(), tmp_path, DAY, panel=other, pause=0.001).failure


def test_an_address_may_come_from_the_environment(stored, hook, tmp_path) -> None:
    notice, _ = stored(channel="webhook", address="env:PANEL_HOOK")
    assert deliver(notice, Delivery(), tmp_path, DAY, environment={"PANEL_HOOK": hook.url}).entry
    assert "PANEL_HOOK" in deliver(notice, Delivery(), tmp_path, DAY, environment={}).failure


def test_an_address_that_left_the_panel_file_is_a_failure_in_words(stored, tmp_path) -> None:
    notice, _ = stored(channel="webhook", address="https://hooks.example.org/SECRET")
    assert "no such address" in deliver(notice, Delivery(), tmp_path, DAY, panel=Panel(format=1)).failure


@apprise_warns
def test_apprise_reaches_a_service(stored, hook, tmp_path) -> None:
    address = hook.url.replace("http://", "json://").partition("?")[0]
    notice, panel = stored(channel="apprise", address=address)
    assert deliver(notice, Delivery(), tmp_path, DAY, panel=panel).entry.body["detail"] == "sent"
    (_, content), *_ = hook.posts
    assert content["title"] == notice.body["subject"]
    assert "benefit boundary crossed" in content["message"]
