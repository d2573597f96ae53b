"""Every limit is a setting with a default, described, and keeps out what is beyond it.

Lines and rates are tested in tests/api/test_fairness.py, time and memory of a job in
tests/service/test_pool.py and test_limits.py, retention in tests/service/test_housekeeping.py.
"""

import gzip
from dataclasses import replace
from pathlib import Path

import orjson
import pytest
from werkzeug.test import TestResponse

from api.app import create_app
from api.services import KEY
from tests.job_documents import strip
from workers.errors import SettingsError
from workers.setting_readers import OFF
from workers.settings import Settings, variable

LIMITS = ("body_bytes", "most_levels", "most_nodes", "most_cases", "most_dofs", "time_limit",
          "memory_limit", "queue_length", "interactive_jobs", "request_rate", "submit_rate",
          "api_threads", "longest_wait", "client_patience")  # fmt: skip
# Off until asked for: what was computed is evidence.
RETENTION = ("keep_days", "keep_bytes")
DOCUMENT = orjson.dumps(strip())
LEVELS = 6  # of the strip: document, geometry, patches, a patch, its corners, a corner
NODES = 6 * 3 + 5 * 3 + 6 * 2  # of the strip, 5 x 2 Q8: corners and middles of sides
COMBINED = orjson.dumps({**strip(), "combinations": {"c": {"pull": 1}}})


def post(settings: Settings, data: bytes, packed: bool) -> TestResponse:
    app = create_app(settings)
    headers = {"Content-Encoding": "gzip"} if packed else {}
    try:
        return app.test_client().post(
            "/v1/jobs", data=data, content_type="application/json", headers=headers
        )
    finally:
        app.extensions[KEY].queue.connection.close()


@pytest.mark.parametrize(
    ("setting", "enough", "data", "status"),
    [
        ("body_bytes", len(DOCUMENT), DOCUMENT, 413),
        ("body_bytes", len(DOCUMENT), gzip.compress(DOCUMENT), 413),
        ("most_levels", LEVELS, DOCUMENT, 422),
        ("most_nodes", NODES, DOCUMENT, 413),
        ("most_dofs", 2 * NODES, DOCUMENT, 413),
        ("most_cases", 2, COMBINED, 413),
        ("memory_limit", 10**9, DOCUMENT, 413),
    ],
)
def test_what_is_beyond_a_limit_is_refused(
    redis_url: str, tmp_path: Path, setting: str, enough: int, data: bytes, status: int
) -> None:
    """What just is enough lets the document in; one less, or of memory far less, does not."""
    packed = data.startswith(b"\x1f\x8b")
    given = Settings(store=tmp_path, redis_url=redis_url)
    less = 1000 if setting == "memory_limit" else enough - 1
    assert post(replace(given, **{setting: enough}), data, packed).status_code == 202
    refused = post(replace(given, **{setting: less}), data, packed)
    assert refused.status_code == status
    problem = refused.get_json()
    assert str(less) in refused.text or setting == "memory_limit"
    assert problem["cautions"]
    assert problem["detail"]


def test_every_limit_is_on_by_default() -> None:
    defaults = Settings()
    for name in LIMITS:
        assert getattr(defaults, name) not in (None, OFF, 0, float("inf")), name
    assert [getattr(defaults, name) for name in RETENTION] == [None, None]


def test_every_limit_is_described_where_operators_look() -> None:
    page = (Path(__file__).parents[2] / "deploy" / "SETTINGS.md").read_text()
    for name in (*LIMITS, *RETENTION):
        (line,) = [line for line in page.splitlines() if line.startswith(f"| `{variable(name)}` |")]
        default, meaning = line.split("|")[2:4]
        assert default.strip()
        assert len(meaning.split()) > 5


def test_a_limit_that_is_none_is_refused_at_the_start() -> None:
    """Zero or less, words, or a name that there is not."""
    for name in ("body_bytes", "most_levels", "most_nodes", "most_dofs", "time_limit"):
        for text in ("0", "-1", "many"):
            with pytest.raises(SettingsError, match=variable(name)):
                Settings.from_environment({variable(name): text})
    with pytest.raises(SettingsError, match="MOST_NODE"):
        Settings.from_environment({"FISHPLATE_MOST_NODE": "5"})
