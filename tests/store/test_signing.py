"""Signatures of heads and sign-offs: they hold for the very text, under the very key, kept elsewhere."""

from __future__ import annotations

import base64

import pytest
from cryptography.hazmat.primitives import serialization
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
from hypothesis import given
from hypothesis import strategies as st

from treering.errors import ProofError, StoreError
from treering.store import Head
from treering.store.keys import key_id, make_key, public_key
from treering.store.signing import read_statement, sign_entry, sign_head, verify_statement

HEAD = Head(1024, "5d" * 32)

# RFC 8032 section 7.1, test 1: secret key, public key and signature of the empty message.
RFC_SECRET = "9d61b19deffd5a60ba844af492ec2cc44449c5697b326919703bac031cae7f60"
RFC_PUBLIC = "d75a980182b10ab7d54bfed3c964073a0ee172f3daa62325af021a68f707511a"


@pytest.fixture
def key(tmp_path):
    path = tmp_path / "keys" / "lead"
    make_key(path, review_folder=tmp_path / "review")
    return path


@pytest.fixture
def public(key):
    return key.with_name("lead.pub").read_bytes()


def signed(key):
    return sign_head(HEAD, review="hand warming", date="2026-05-04", key=key)


def test_signed_head_says_in_words_what_is_signed(key, public):
    text = signed(key)
    lines = text.splitlines()
    assert lines[:5] == [
        "treering",
        "review hand warming",
        "size 1024",
        f"root {HEAD.root}",
        "date 2026-05-04",
    ]
    assert lines[5].startswith(f"signature {key_id(public_key(public))} ")
    statement = verify_statement(text, public)
    assert statement.head == HEAD
    assert statement.facts["review"] == "hand warming"


def test_signature_is_ed25519_over_the_lines_before_it(key, public):
    """Checked with the cryptography package itself, from the description in the module."""
    body, _, last = signed(key).rpartition("signature ")
    signature = base64.b64decode(last.split()[1])
    serialization.load_pem_public_key(public).verify(signature, body.encode())


def test_keys_are_those_of_rfc_8032(tmp_path):
    secret = Ed25519PrivateKey.from_private_bytes(bytes.fromhex(RFC_SECRET))
    path = tmp_path / "rfc"
    path.write_bytes(
        secret.private_bytes(
            serialization.Encoding.PEM, serialization.PrivateFormat.PKCS8, serialization.NoEncryption()
        )
    )
    path.chmod(0o600)
    text = signed(path)
    raw = bytes.fromhex(RFC_PUBLIC)
    pem = Ed25519PrivateKey.from_private_bytes(bytes.fromhex(RFC_SECRET)).public_key()
    assert pem.public_bytes(serialization.Encoding.Raw, serialization.PublicFormat.Raw) == raw
    assert verify_statement(
        text,
        pem.public_bytes(serialization.Encoding.PEM, serialization.PublicFormat.SubjectPublicKeyInfo),
    )


@given(data=st.data())
def test_no_changed_character_passes(tmp_path_factory, data):
    folder = tmp_path_factory.getbasetemp() / "signing"
    key = folder / "lead"
    if not key.exists():
        make_key(key)
    text, public = signed(key), key.with_name("lead.pub").read_bytes()
    place = data.draw(st.integers(0, len(text) - 2))
    other = data.draw(st.characters(min_codepoint=32, max_codepoint=126).filter(lambda c: c != text[place]))
    changed = text[:place] + other + text[place + 1 :]
    try:
        same = verify_statement(changed, public)
    except StoreError:
        return
    # Only the unused last bits of the base64 text may differ without changing the signature.
    assert same.signed == verify_statement(text, public).signed
    assert same.signatures == read_statement(text).signatures


def test_line_ends_of_another_system_do_no_harm(key, public):
    assert verify_statement(signed(key).replace("\n", "\r\n"), public).head == HEAD


def test_another_key_is_refused(key, tmp_path):
    make_key(tmp_path / "other")
    with pytest.raises(ProofError, match="did not sign"):
        verify_statement(signed(key), (tmp_path / "other.pub").read_bytes())


def test_sign_off_of_an_entry_names_person_and_hash(evidence, study, moment, key, public):
    (entry,) = evidence.append([study()], known_at=moment)
    text = sign_entry(entry, person="AB", review=evidence.review, date="2026-05-04", key=key)
    statement = verify_statement(text, public)
    assert statement.head is None
    assert (statement.facts["hash"], statement.facts["person"]) == (entry.hash, "AB")


def test_key_in_the_review_folder_is_refused(tmp_path, key):
    inside = tmp_path / "review" / "config" / "key"
    with pytest.raises(ProofError, match="must not lie in the review folder"):
        make_key(inside, review_folder=tmp_path / "review")
    assert not inside.exists()
    with pytest.raises(ProofError, match="must not lie"):
        sign_head(HEAD, review="x", date="2026-05-04", key=key, review_folder=tmp_path)


def test_link_into_the_review_folder_is_refused(tmp_path):
    (tmp_path / "review").mkdir()
    (tmp_path / "link").symlink_to(tmp_path / "review")
    with pytest.raises(ProofError, match="must not lie"):
        make_key(tmp_path / "link" / "key", review_folder=tmp_path / "review")


def test_private_key_is_for_its_owner_and_never_written_over(key):
    assert key.stat().st_mode & 0o777 == 0o600
    with pytest.raises(ProofError, match="never written over"):
        make_key(key)
    key.chmod(0o644)
    with pytest.raises(ProofError, match="chmod 600"):
        signed(key)


@pytest.mark.parametrize("review", ["", "two\nlines", " edge"])
def test_text_that_would_break_the_lines_is_not_signed(key, review):
    with pytest.raises(ProofError, match="review cannot be signed"):
        sign_head(HEAD, review=review, date="2026-05-04", key=key)


@pytest.mark.parametrize("text", ["", "treering\n", "other\nreview a\n", "treering\nsize x\nsignature a b\n"])
def test_other_text_is_no_statement(text, public):
    with pytest.raises(ProofError, match="no signed statement"):
        verify_statement(text, public)


def test_a_fact_that_appears_twice_is_refused(key, public):
    text = signed(key).replace("date ", "size 1025\ndate ")
    with pytest.raises(ProofError):
        verify_statement(text, public)


def test_what_is_no_key_is_refused(key, tmp_path):
    (tmp_path / "noise").write_text("noise")
    (tmp_path / "noise").chmod(0o600)
    with pytest.raises(ProofError, match="no Ed25519 key"):
        signed(tmp_path / "noise")
    with pytest.raises(ProofError, match="no Ed25519 key"):
        verify_statement(signed(key), b"noise")
