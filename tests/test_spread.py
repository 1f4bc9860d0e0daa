"""Runners: the same results from threads, processes and Dask, and tasks that outlive their worker."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

import fuelair
from fuelair.errors import InputError, MissingExtraError, WorkersError
from fuelair.study import cluster, spread
from fuelair.study.spread import RUNNERS, Certificates, Runner

PARENT = Path(fuelair.__file__).parents[1]


def script(tmp_path: Path, body: str) -> subprocess.CompletedProcess[str]:
    """Run a script of its own: workers have to find the functions, and a test module is none they can import."""
    place = tmp_path / "tasks.py"
    place.write_text(
        "import os, signal, sys, time\nfrom pathlib import Path\nfrom fuelair.errors import *\n"
        "from fuelair.study.spread import Certificates, Runner, spread\n" + body,
        encoding="utf-8",
    )
    environment = os.environ | {"PYTHONPATH": os.pathsep.join([str(PARENT), os.environ.get("PYTHONPATH", "")])}
    return subprocess.run(
        [sys.executable, "-W", "error", str(place)], capture_output=True, text=True, timeout=60, cwd=tmp_path, env=environment
    )


def test_threads_in_order_and_as_they_come() -> None:
    def slow(shared: float, task: int) -> int:
        time.sleep(shared * (5 - task % 5))
        return task * task

    for ordered in (True, False):
        found = list(spread.spread(slow, 0.002, iter(range(40)), Runner("threads", 4), ordered=ordered))
        assert sorted(found) == [(i, i * i) for i in range(40)]
        if ordered:
            assert found == sorted(found)


def test_tasks_are_taken_only_a_few_ahead() -> None:
    taken, gate = [], threading.Event()

    def tasks():
        for i in range(100):
            taken.append(i)
            yield i

    results = spread.spread(lambda shared, task: gate.wait(10) and task, None, tasks(), Runner("threads", 2))
    gate.set()
    assert next(results) == (0, 0)
    assert len(taken) <= 2 * spread.AHEAD
    results.close()
    assert len(taken) <= 2 * spread.AHEAD


def test_a_task_that_raises_ends_the_study() -> None:
    def odd(shared: None, task: int) -> int:
        if task == 5:
            raise ValueError("five")
        return task

    with pytest.raises(ValueError, match="five"):
        list(spread.spread(odd, None, range(100), Runner("threads", 2)))


def test_no_task_no_result() -> None:
    assert list(spread.spread(lambda shared, task: task, None, [])) == []


@pytest.mark.parametrize("name", RUNNERS[1:])
def test_a_killed_worker_costs_no_task(tmp_path: Path, name: str) -> None:
    out = script(
        tmp_path,
        f"""
def square(flag, task):
    if task == 7:
        try:
            Path(flag).touch(exist_ok=False)
        except FileExistsError:
            pass
        else:
            os.kill(os.getpid(), signal.SIGKILL)
    time.sleep(0.01)
    return task * task

if __name__ == "__main__":
    found = list(spread(square, "killed", range(30), Runner({name!r}, 2)))
    assert Path("killed").exists()
    assert found == [(i, i * i) for i in range(30)], found
    print("good")
""",
    )
    assert out.stdout == "good\n", out.stderr


def test_workers_that_always_die_end_the_study(tmp_path: Path) -> None:
    out = script(
        tmp_path,
        """
def deadly(shared, task):
    os.kill(os.getpid(), signal.SIGKILL)

if __name__ == "__main__":
    try:
        list(spread(deadly, None, range(4), Runner("processes", 1)))
    except WorkersError as error:
        print(error)
""",
    )
    assert "died 6 times" in out.stdout, out.stderr


def test_workers_end_when_their_parent_is_killed(tmp_path: Path) -> None:
    place = tmp_path / "tasks.py"
    place.write_text(
        "import os, time\nfrom pathlib import Path\nfrom fuelair.study.spread import Runner, spread\n"
        "def say(shared, task):\n    Path(f'pid-{os.getpid()}').touch()\n    time.sleep(0.05)\n"
        "if __name__ == '__main__':\n    list(spread(say, None, range(100000), Runner('processes', 2)))\n",
        encoding="utf-8",
    )
    environment = os.environ | {"PYTHONPATH": str(PARENT)}
    parent = subprocess.Popen([sys.executable, str(place)], cwd=tmp_path, env=environment)
    try:
        found = wait_for(lambda: pids(tmp_path), 2)
    finally:
        parent.send_signal(signal.SIGKILL)
        parent.wait()
    assert wait_for(lambda: [pid for pid in found if not alive(pid)], 2) == found


def wait_for(look, count: int, seconds: float = 20.0) -> list[int]:
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        found = look()
        if len(found) >= count:
            return found
        time.sleep(0.05)
    raise AssertionError(f"waited {seconds} s in vain")


def alive(pid: int) -> bool:
    """Whether a process runs still; one that nobody has waited for yet is dead all the same."""
    try:
        return Path(f"/proc/{pid}/stat").read_text(encoding="utf-8").rpartition(")")[2].split()[0] != "Z"
    except OSError:
        return False


def test_another_release_on_a_worker_is_refused() -> None:
    with pytest.raises(WorkersError, match="one release"):
        spread.work(("0.0.0", b""), None)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: Runner("gpu"), "threads, processes, dask"),
        (lambda: Runner("threads", 0), "1 or more"),
        (lambda: Runner("threads", scheduler="tcp://127.0.0.1:1"), "--runner dask"),
        (lambda: Runner("dask", scheduler="tls://127.0.0.1:1"), "--tls-ca"),
    ],
)
def test_what_is_no_runner_is_said(make, words: str) -> None:
    with pytest.raises(InputError) as caught:
        make()
    assert words in str(caught.value)


def test_certificates_must_be_there(tmp_path: Path) -> None:
    tls = Certificates(tmp_path / "ca.pem", tmp_path / "own.pem", tmp_path / "key.pem")
    with pytest.raises(InputError, match=r"ca\.pem"):
        cluster.Dask(Runner("dask", scheduler="tls://127.0.0.1:9", certificates=tls), ("", b""))


def test_without_the_cluster_extra_one_line_says_how(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    with pytest.raises(MissingExtraError, match=r"fuelair\[cluster\]"):
        cluster.Dask(Runner("dask", 1), ("", b""))


def certificates(folder: Path) -> Certificates:
    """An authority of one's own and a certificate that it signed, good for an hour."""
    import datetime as dt

    from cryptography import x509
    from cryptography.hazmat.primitives import hashes, serialization
    from cryptography.hazmat.primitives.asymmetric import ec

    now = dt.datetime.now(dt.UTC)
    keys = [ec.generate_private_key(ec.SECP256R1()) for _ in range(2)]
    names = [x509.Name([x509.NameAttribute(x509.NameOID.COMMON_NAME, text)]) for text in ("authority", "127.0.0.1")]
    for i, file in enumerate(("ca.pem", "own.pem")):
        made = (
            x509.CertificateBuilder()
            .subject_name(names[i])
            .issuer_name(names[0])
            .public_key(keys[i].public_key())
            .serial_number(i + 1)
            .not_valid_before(now - dt.timedelta(minutes=5))
            .not_valid_after(now + dt.timedelta(hours=1))
            .add_extension(x509.BasicConstraints(ca=i == 0, path_length=None), critical=True)
            .sign(keys[0], hashes.SHA256())
        )
        (folder / file).write_bytes(made.public_bytes(serialization.Encoding.PEM))
    encoding = (serialization.Encoding.PEM, serialization.PrivateFormat.PKCS8, serialization.NoEncryption())
    (folder / "key.pem").write_bytes(keys[1].private_bytes(*encoding))
    return Certificates(folder / "ca.pem", folder / "own.pem", folder / "key.pem")


def test_a_scheduler_and_two_workers_started_by_hand_over_tls(tmp_path: Path) -> None:
    """As the README has it; one of the workers is killed on the way."""
    tls = certificates(tmp_path)
    (tmp_path / "work.py").write_text(
        "import os, time\nfrom pathlib import Path\n"
        "def square(shared, task):\n    Path(f'pid-{os.getpid()}').touch()\n    time.sleep(0.02)\n    return task * task\n",
        encoding="utf-8",
    )
    environment = os.environ | {"PYTHONPATH": os.pathsep.join([str(PARENT), str(tmp_path)])}
    files = ("--tls-ca-file", str(tls.authority), "--tls-cert", str(tls.certificate), "--tls-key", str(tls.key))

    def start(*words: str) -> subprocess.Popen[bytes]:
        quiet = subprocess.DEVNULL
        line = [sys.executable, "-m", "dask", *words, *files, "--no-dashboard"]
        return subprocess.Popen(line, cwd=tmp_path, env=environment, stdout=quiet, stderr=quiet)

    scheduler = start("scheduler", "--host", "tls://127.0.0.1", "--port", "0", "--scheduler-file", "scheduler.json")
    workers = []
    try:
        place = tmp_path / "scheduler.json"
        wait_for(lambda: [1] if place.exists() and place.stat().st_size else [], 1)
        address = json.loads(place.read_text(encoding="utf-8"))["address"]
        assert address.startswith("tls://127.0.0.1:")
        workers = [start("worker", address, "--nthreads", "1", "--host", "127.0.0.1", "--no-nanny") for _ in range(2)]
        body = f"""
from work import square

if __name__ == "__main__":
    tls = Certificates(Path("ca.pem"), Path("own.pem"), Path("key.pem"))
    found = list(spread(square, None, range(300), Runner("dask", scheduler={address!r}, certificates=tls)))
    assert found == [(i, i * i) for i in range(300)], found
    print("good")
"""
        killer = threading.Thread(target=lambda: os.kill(wait_for(lambda: pids(tmp_path), 2)[0], signal.SIGKILL))
        killer.start()
        out = script(tmp_path, body)
        killer.join()
        assert out.stdout == "good\n", out.stderr
        assert len(pids(tmp_path)) == 2
    finally:
        for process in (*workers, scheduler):
            process.kill()
            process.wait()


def pids(folder: Path) -> list[int]:
    return [int(p.name[4:]) for p in folder.glob("pid-*")]
