"""Settings come from the environment, and nothing in it that is wrong passes unseen."""

from pathlib import Path

import pytest

from workers.errors import SettingsError
from workers.setting_table import as_markdown
from workers.settings import Settings

SETTINGS_PAGE = Path("deploy/SETTINGS.md")


def test_nothing_configured_gives_a_server_on_loopback_with_its_own_redis() -> None:
    settings = Settings.from_environment({})
    assert settings.host == "127.0.0.1"
    assert settings.redis_url is None
    assert settings.workers >= 1


def test_a_child_process_sees_the_same_settings() -> None:
    settings = Settings(
        store=Path("/srv/plates"),
        redis_url="redis://queue:6379/1",
        memory_limit=3_000_000_000,
        request_rate="off",
        keep_days=0.5,
        keep_bytes=10**12,
    )
    assert Settings.from_environment(settings.as_environment()) == settings


@pytest.mark.parametrize(
    ("text", "size"),
    [("1000", 1000), ("64MiB", 64 * 2**20), ("2 GiB", 2 * 2**30), ("512 B", 512)],
)
def test_sizes_are_understood_with_and_without_a_unit(text: str, size: int) -> None:
    # IEC 80000-13: Ki, Mi, Gi are powers of 1024.
    assert Settings.from_environment({"FISHPLATE_BODY_BYTES": text}).body_bytes == size


@pytest.mark.parametrize(
    ("name", "text"),
    [
        ("WORKERS", "-1"),
        ("WORKERS", "two"),
        ("PORT", "65536"),
        ("BODY_BYTES", "64 MB"),
        ("BODY_BYTES", "0"),
        ("TIME_LIMIT", "-1"),
        ("RECONCILE_EVERY", "nan"),
        ("RECONCILE_EVERY", "soon"),
        ("REDIS_URL", "localhost:6379"),
        ("REQUEST_RATE", "100"),
        ("SUBMIT_RATE", "0/minute"),
        ("KEEP_DAYS", "0"),
        ("KEEP_BYTES", "-1"),
        ("LOG_LEVEL", "loud"),
    ],
)
def test_a_wrong_value_is_refused_by_name(name: str, text: str) -> None:
    with pytest.raises(SettingsError, match=f"FISHPLATE_{name}='{text}'"):
        Settings.from_environment({f"FISHPLATE_{name}": text})


def test_a_misspelt_limit_is_refused_rather_than_ignored() -> None:
    with pytest.raises(SettingsError, match=r"FISHPLATE_MEMORY_LIMITS; known: .*MEMORY_LIMIT"):
        Settings.from_environment({"FISHPLATE_MEMORY_LIMITS": "1GiB"})


def test_other_programs_variables_and_empty_ones_do_not_matter() -> None:
    environment = {"HOME": "/home/yard", "FISHPLATE_WORKERS": ""}
    assert Settings.from_environment(environment) == Settings()


def test_nothing_is_removed_that_nobody_asked_to_remove() -> None:
    """Results are evidence for whoever signed for them."""
    settings = Settings.from_environment({})
    assert settings.keep_days is None
    assert settings.keep_bytes is None


def test_a_clients_token_is_not_taken_for_a_misspelt_setting() -> None:
    """`fishplate submit` reads FISHPLATE_TOKEN; a shell may have it while it starts a server."""
    assert Settings.from_environment({"FISHPLATE_TOKEN": "secret"}) == Settings()


def test_the_page_of_settings_is_up_to_date() -> None:
    """`python -m workers.setting_table > deploy/SETTINGS.md` writes it anew."""
    root = Path(__file__).parents[2]
    assert (root / SETTINGS_PAGE).read_text() == as_markdown()
