"""The private Redis server: one for each store, for this user alone, ends with its owner."""

import os
import signal
import socket
import stat
import subprocess
import sys
from pathlib import Path

import psutil
import pytest
import redis

from tests.service_pool import ROOT, eventually
from workers.errors import StoreError
from workers.private_redis import PrivateRedis, address, socket_path

OWN = """
import sys, time
from pathlib import Path
from workers.private_redis import PrivateRedis
with PrivateRedis(Path(sys.argv[1])) as server:
    print(server._process.pid, flush=True)
    time.sleep(60)
"""


def answers(store: Path) -> bool:
    with redis.Redis.from_url(address(store), socket_timeout=1.0) as client:
        try:
            return bool(client.ping())
        except redis.ConnectionError:
            return False


def test_it_listens_on_a_socket_for_this_user_alone(tmp_path: Path) -> None:
    with PrivateRedis(tmp_path) as server:
        mode = server.socket.stat().st_mode
        assert stat.S_ISSOCK(mode)
        assert stat.S_IMODE(mode) == 0o700
        with redis.Redis.from_url(server.url) as client:
            assert client.config_get("port") == {"port": "0"}
    assert not answers(tmp_path)


def test_what_was_queued_is_there_after_a_restart(tmp_path: Path) -> None:
    for turn in range(2):
        with PrivateRedis(tmp_path) as server, redis.Redis.from_url(server.url) as client:
            assert client.get("kept") == (b"yes" if turn else None)
            client.set("kept", "yes")


def test_the_second_to_come_shares_the_server_and_leaves_it_running(tmp_path: Path) -> None:
    with PrivateRedis(tmp_path) as first:
        with PrivateRedis(tmp_path) as second:
            assert second.url == first.url
        assert answers(tmp_path)


def test_data_that_the_server_cannot_read_is_set_aside(tmp_path: Path) -> None:
    """The store knows what has to be done; a damaged file must not keep the service from it."""
    with PrivateRedis(tmp_path) as server, redis.Redis.from_url(server.url) as client:
        for number in range(100):
            client.set(f"kept {number}", "yes")
    (file,) = (tmp_path / "redis" / "appendonlydir").glob("*.incr.aof")
    file.write_bytes(file.read_bytes()[:500] + b"!" * 50 + file.read_bytes()[550:])
    with PrivateRedis(tmp_path) as server, redis.Redis.from_url(server.url) as client:
        assert client.dbsize() == 0
    assert (tmp_path / "redis" / "refused" / file.name).exists()


def test_the_server_of_another_machine_is_named(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    with PrivateRedis(tmp_path):
        monkeypatch.setattr(socket, "gethostname", lambda: "drawing-office")
        with pytest.raises(StoreError, match=r"runs on .* set FISHPLATE_REDIS_URL"):
            PrivateRedis(tmp_path).__enter__()


def test_it_ends_with_a_killed_owner(tmp_path: Path) -> None:
    with subprocess.Popen(
        [sys.executable, "-c", OWN, str(tmp_path)], cwd=ROOT, stdout=subprocess.PIPE
    ) as owner:
        assert owner.stdout is not None
        pid = int(owner.stdout.readline())
        assert answers(tmp_path)
        owner.send_signal(signal.SIGKILL)
        owner.wait()
    eventually(lambda: not psutil.pid_exists(pid))
    with PrivateRedis(tmp_path):  # and the next owner starts it anew
        assert answers(tmp_path)


def test_a_store_deep_in_the_tree_has_its_socket_elsewhere(tmp_path: Path) -> None:
    # unix(7): a socket's path has at most 108 bytes, the final zero included.
    store = tmp_path / ("yard" * 25) / "store"
    assert len(os.fsencode(socket_path(store))) < 108
    assert len(os.fsencode(store / "redis" / "redis.sock")) > 108
    with PrivateRedis(store) as server:
        assert answers(store)
        assert server.socket.parent.stat().st_mode & 0o077 == 0
    server.socket.parent.rmdir()


def test_a_machine_without_the_program_is_told_what_to_do(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("PATH", str(tmp_path))
    with pytest.raises(StoreError, match=r"no redis-server is installed.*FISHPLATE_REDIS_URL"):
        PrivateRedis(tmp_path).__enter__()


def test_a_server_that_does_not_start_is_an_error_with_its_log(tmp_path: Path) -> None:
    (socket_path(tmp_path) / "in the way").mkdir(parents=True)
    with pytest.raises(StoreError, match=r"redis-server ended with status \d+; see .*redis\.log"):
        PrivateRedis(tmp_path).__enter__()
