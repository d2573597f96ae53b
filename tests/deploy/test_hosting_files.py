"""What the files under deploy/hosting say: commands, settings, paths and ports that exist."""

import json
import re
import shlex
import shutil
import subprocess
from pathlib import Path
from typing import Any

import pytest
import yaml

from api.app import create_app
from tests.command_line import parse
from workers.cautions import STANDING
from workers.settings import Settings

ROOT = Path(__file__).resolve().parent.parent.parent
HOSTING = ROOT / "deploy" / "hosting"
UNITS = sorted(HOSTING.glob("*.service"))
PROGRAM = "/opt/fishplate/.venv/bin/fishplate"
BACKUPS = "/var/backups/fishplate"
STORE = "/var/lib/fishplate/store"
# Overall exposure in tenths as systemd counts it (0 is none, 100 all); below 20 it calls "OK".
MOST_EXPOSED = 15


def values(unit: Path, key: str) -> list[str]:
    """Values of a key in a unit file, in order."""
    return re.findall(rf"^{key}=(.*)$", unit.read_text(), re.MULTILINE)


def environment_file() -> dict[str, str]:
    lines = (HOSTING / "fishplate.env").read_text().splitlines()
    return dict(line.split("=", 1) for line in lines if line and not line.startswith("#"))


def compose() -> Any:
    return yaml.safe_load((HOSTING / "compose.yaml").read_text())


# --- systemd -------------------------------------------------------------------------------------


def test_the_settings_are_settings_and_agree_with_redis_and_proxy() -> None:
    settings = Settings.from_environment(environment_file())
    assert str(settings.store) == STORE
    redis = (HOSTING / "redis.conf").read_text()
    assert settings.redis_url == f"redis://:PASSWORD@127.0.0.1:{_redis('port', redis)}/0"
    proxy = (HOSTING / "nginx.conf").read_text()
    assert f"server {settings.host}:{settings.port};" in proxy
    assert settings.proxies == 1
    assert f"client_max_body_size {settings.body_bytes // 1024**2}m;" in proxy
    (patience,) = re.findall(r"proxy_read_timeout (\d+)s;", proxy)
    assert int(patience) > 2 * settings.longest_wait


def _redis(key: str, text: str) -> str:
    (value,) = re.findall(rf"^{key} (.*)$", text, re.MULTILINE)
    return str(value)


@pytest.mark.parametrize("unit", UNITS, ids=lambda unit: unit.stem)
def test_a_unit_runs_a_command_that_exists(unit: Path, tmp_path: Path) -> None:
    (line,) = values(unit, "ExecStart")
    program, *arguments = shlex.split(line)
    assert program == PROGRAM
    # The folder of back-ups is there on the machine; the command line looks.
    parse([str(tmp_path) if argument == BACKUPS else argument for argument in arguments])
    assert values(unit, "EnvironmentFile") == ["/etc/fishplate/fishplate.env"]
    for uri in values(unit, "Documentation"):
        assert (ROOT / uri.removeprefix("file:///opt/fishplate/")).is_file()


def test_workers_have_longer_to_stop_than_they_give_their_jobs() -> None:
    (stop,) = values(HOSTING / "fishplate-workers.service", "TimeoutStopSec")
    assert int(stop) > Settings().shutdown_grace + 2 * 10 + 5  # see workers/pool.py, `_stop`


def test_every_timer_has_its_service() -> None:
    timers = sorted(HOSTING.glob("*.timer"))
    assert len(timers) == 2
    for timer in timers:
        assert timer.with_suffix(".service") in UNITS


@pytest.mark.skipif(shutil.which("systemd-analyze") is None, reason="no systemd here")
def test_systemd_finds_no_fault_and_little_exposure(tmp_path: Path) -> None:
    """Drop-in and all; the program is stood in for, and Debian's unit of Redis."""
    for file in (*UNITS, *HOSTING.glob("*.timer")):
        (tmp_path / file.name).write_text(file.read_text().replace(PROGRAM, "/bin/true"))
    (tmp_path / "redis-server@.service").write_text("[Service]\nExecStart=/bin/true\n")
    drop_in = tmp_path / "fishplate-.service.d"
    drop_in.mkdir()
    shutil.copy(HOSTING / "hardening.conf", drop_in)
    names = [path.name for path in tmp_path.iterdir() if path.is_file()]
    places = f"{tmp_path}:/lib/systemd/system:/usr/lib/systemd/system"
    verified = _systemd_analyze(places, "verify", "--man=no", *names)
    assert verified.returncode == 0, verified.stderr
    ours = [line for line in verified.stderr.splitlines() if "fishplate" in line]
    assert ours == []
    for unit in UNITS:
        judged = _systemd_analyze(
            places, "security", "--offline=true", f"--threshold={MOST_EXPOSED}", "--no-pager",
            str(tmp_path / unit.name),
        )  # fmt: skip
        assert judged.returncode == 0, judged.stdout + judged.stderr


def _systemd_analyze(places: str, *arguments: str) -> "subprocess.CompletedProcess[str]":
    return subprocess.run(
        ["systemd-analyze", *arguments],
        env={"SYSTEMD_UNIT_PATH": places, "PATH": "/usr/bin:/bin", "LC_ALL": "C.UTF-8"},
        capture_output=True,
        text=True,
        check=False,
    )


# --- proxy ---------------------------------------------------------------------------------------


def test_answers_of_the_proxy_itself_carry_the_standing_cautions() -> None:
    proxy = (HOSTING / "nginx.conf").read_text()
    (cautions,) = re.findall(r"default '(.*)';", proxy)
    assert json.loads(cautions) == [caution.as_json() for caution in STANDING]
    problems = re.findall(r"return (\d+) '(\{.*\})';", proxy)
    assert [status for status, _ in problems] == ["413", "503"]
    for status, text in problems:
        problem = json.loads(text.replace("$fishplate_cautions", cautions))
        assert problem["status"] == int(status)
        assert problem["detail"]
        assert problem["cautions"]


# --- containers ----------------------------------------------------------------------------------


def test_every_container_runs_a_command_that_exists_with_settings_that_exist(
    tmp_path: Path,
) -> None:
    services = compose()["services"]
    ours = {name: s for name, s in services.items() if s["image"] == "fishplate"}
    assert set(ours) == {"api", "workers", "backup"}
    for service in ours.values():
        parse([str(tmp_path) if part == BACKUPS else part for part in service["command"]])
        given = {name: _filled(text) for name, text in service["environment"].items()}
        settings = Settings.from_environment(given)
        assert str(settings.store) == STORE
        assert (settings.redis_url, settings.proxies) == ("redis://:given@redis:6379/0", 1)
    assert parse(ours["api"]["command"]).params["port"] == Settings().port


def _filled(text: str) -> str:
    """As compose fills in: `${NAME:-default}`, and `${NAME:?why}` where NAME is given."""
    return re.sub(r"\$\{\w+:\?[^}]*\}", "given", re.sub(r"\$\{\w+:-([^}]*)\}", r"\1", text))


def test_containers_are_guarded_and_named_without_a_registry() -> None:
    services = compose()["services"]
    for service in services.values():
        assert service["read_only"]
        assert service["cap_drop"] == ["ALL"]
        assert service["security_opt"] == ["no-new-privileges:true"]
        assert re.fullmatch(r"[a-z]+(:[a-z0-9.]+)?", service["image"])
    published = {name: s["ports"] for name, s in services.items() if "ports" in s}
    assert published == {"api": ["443:443"]}  # the proxy's, which shares the server's network
    assert services["proxy"]["network_mode"] == "service:api"
    assert "given" in _filled(" ".join(services["redis"]["command"]))  # not without a password


def test_queue_and_line_in_containers_are_kept_as_on_a_machine() -> None:
    command = compose()["services"]["redis"]["command"]
    text = (HOSTING / "redis.conf").read_text()
    for key in ("appendonly", "appendfsync", "maxmemory", "maxmemory-policy"):
        assert command[command.index(f"--{key}") + 1] == _redis(key, text)


def test_volumes_and_files_of_containers_exist() -> None:
    document = compose()
    given_by_the_office = {"fishplate.crt", "fishplate.key"}
    used = set()
    for service in document["services"].values():
        for volume in service.get("volumes", ()):
            source = _filled(volume).split(":")[0]
            if source.startswith("./"):
                name = source.removeprefix("./")
                assert name in given_by_the_office or (HOSTING / name).is_file()
            else:
                used.add(source)
    assert used == set(document["volumes"])


def test_the_image_is_made_of_what_is_here() -> None:
    text = (HOSTING / "Dockerfile").read_text().replace("\\\n", " ")
    steps = [line.split(maxsplit=1) for line in text.splitlines() if line and line[0] != "#"]
    known = {"FROM", "RUN", "WORKDIR", "COPY", "USER", "ENV", "VOLUME", "ENTRYPOINT", "CMD"}
    assert {step for step, _ in steps} == known
    copied = {part for step, rest in steps if step == "COPY" for part in rest.split()[:-1]}
    assert all((ROOT / part).exists() for part in copied)
    assert {"api", "workers", "elements", "pyproject.toml", "README.md", "LICENSE"} <= copied
    entry = dict(step for step in steps if step[0] in ("ENTRYPOINT", "CMD"))
    assert json.loads(entry["ENTRYPOINT"]) == ["fishplate"]
    parse(json.loads(entry["CMD"]))
    # The same libraries as a machine gets.
    setup = (ROOT / "deploy" / "setup").read_text()
    wanted = set(re.findall(r"echo (lib\w+)", setup))
    assert wanted == set(re.findall(r"\blib[a-z0-9]+\b", text.split("rm -rf")[0]))
    build = compose()["services"]["api"]["build"]
    assert (HOSTING / build["context"]).resolve() == ROOT.resolve()
    assert (ROOT / build["dockerfile"]).is_file()


def test_a_health_check_asks_for_a_route_that_exists(tmp_path: Path) -> None:
    asked = " ".join(compose()["services"]["api"]["healthcheck"]["test"])
    (path,) = re.findall(r"8470(/[a-z/]+)", asked)
    routes = {
        rule.rule
        for rule in create_app(Settings(store=tmp_path, redis_url="unix:///x")).url_map.iter_rules()
    }
    assert path in routes
