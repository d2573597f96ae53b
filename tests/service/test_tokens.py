"""Tokens: shown once, kept as digests, good for what their role says, and worthless in time."""

import hashlib
import multiprocessing
import stat
from dataclasses import replace
from datetime import timedelta

import pytest

from workers import tokens as module
from workers.errors import StoreError, TokenError
from workers.store import Store
from workers.tokens import Tokens


@pytest.fixture
def tokens(store: Store) -> Tokens:
    return Tokens(store.root)


def test_a_token_is_found_by_another_process_and_by_its_whole_text_only(
    tokens: Tokens, store: Store
) -> None:
    token, text = tokens.add("winch-script", "submit", "dock")
    assert Tokens(store.root).find(text) == token
    assert (token.name, token.role, token.workspace) == ("winch-script", "submit", "dock")
    for wrong in ("", text[:-1], text + "0", text[:-1] + "g", text.upper(), f" {text}", "é" * 90):
        assert tokens.find(wrong) is None
    other = text[:-1] + ("0" if text[-1] != "0" else "1")
    assert tokens.find(other) is None


def test_the_secret_is_not_kept(tokens: Tokens) -> None:
    """Only its SHA-256 digest (FIPS 180-4) is, in a file that is its owner's alone."""
    _, text = tokens.add("a", "read")
    secret = text.rsplit("_", 1)[1]
    kept = tokens.path.read_text()
    assert secret not in kept
    assert hashlib.sha256(secret.encode()).hexdigest() in kept
    assert stat.S_IMODE(tokens.path.stat().st_mode) == 0o600


def test_secrets_are_256_bits_and_never_the_same(tokens: Tokens) -> None:
    secrets = {tokens.add(f"t{n}", "read")[1].rsplit("_", 1)[1] for n in range(20)}
    assert len(secrets) == 20
    assert {len(secret) * 4 for secret in secrets} == {256}


@pytest.mark.parametrize(
    ("role", "allowed"),
    [("read", ["read"]), ("submit", ["read", "submit"]), ("admin", ["read", "submit", "admin"])],
)
def test_each_role_may_what_those_before_it_may(
    tokens: Tokens, role: str, allowed: list[str]
) -> None:
    token, _ = tokens.add("a", role)
    assert [r for r in module.ROLES if token.may(r)] == allowed


def test_a_revoked_token_is_worthless_in_every_process_at_once(
    tokens: Tokens, store: Store
) -> None:
    _, text = tokens.add("a", "read")
    elsewhere = Tokens(store.root)
    assert elsewhere.find(text)
    tokens.revoke("a")
    assert elsewhere.find(text) is None
    assert len(tokens.all()) == 1  # the server stays closed
    with pytest.raises(TokenError, match="'a' that could be revoked"):
        tokens.revoke("a")


def test_a_name_is_free_again_after_revoking(tokens: Tokens) -> None:
    _, old = tokens.add("a", "read")
    with pytest.raises(TokenError, match="already"):
        tokens.add("a", "read")
    tokens.revoke("a")
    _, new = tokens.add("a", "read")
    assert tokens.find(new)
    assert tokens.find(old) is None


def test_a_token_expires(tokens: Tokens) -> None:
    _, text = tokens.add("a", "read", lifetime=timedelta(days=1))
    token = tokens.find(text)
    assert token is not None
    assert not replace(token, expires=token.created).usable
    _, text = tokens.add("b", "read", lifetime=timedelta(days=-1))
    assert tokens.find(text) is None


@pytest.mark.parametrize(
    ("name", "role", "workspace"),
    [("", "read", "w"), ("a b", "read", "w"), ("../x", "read", "w"), ("a\n", "read", "w"),
     ("a", "root", "w"), ("a", "read", ""), ("a", "read", ".."), ("a", "read", "a/b"),
     ("a", "read", "Dock"), ("a", "read", "w\n")],
)  # fmt: skip
def test_names_that_could_be_something_else_are_refused(
    tokens: Tokens, name: str, role: str, workspace: str
) -> None:
    with pytest.raises(TokenError):
        tokens.add(name, role, workspace)
    assert tokens.all() == ()


def test_a_damaged_file_lets_nobody_in(tokens: Tokens) -> None:
    _, text = tokens.add("a", "read")
    tokens.path.write_text("[{")
    with pytest.raises(StoreError, match="nobody is let in"):
        Tokens(tokens.path.parent).find(text)


def test_digests_are_compared_in_constant_time(
    tokens: Tokens, monkeypatch: pytest.MonkeyPatch
) -> None:
    """By the standard library's function for it, once for each look, also for unknown tokens."""
    _, text = tokens.add("a", "read")
    compared = []
    real = module.hmac.compare_digest
    monkeypatch.setattr(
        module.hmac, "compare_digest", lambda a, b: compared.append((a, b)) or real(a, b)
    )
    for given in (text, text[:-1], "fishplate_00000000_" + "0" * 64, "nonsense"):
        before = len(compared)
        tokens.find(given)
        assert len(compared) == before + 1


def test_tokens_made_at_the_same_time_are_all_kept(tokens: Tokens, store: Store) -> None:
    fork = multiprocessing.get_context("fork")
    makers = [fork.Process(target=Tokens(store.root).add, args=(f"t{n}", "read")) for n in range(8)]
    for maker in makers:
        maker.start()
    for maker in makers:
        maker.join()
    assert {token.name for token in tokens.all()} == {f"t{n}" for n in range(8)}
    assert not tokens.path.with_name("tokens.json.new").exists()
