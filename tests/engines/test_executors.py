"""The same bytes from threads, processes and a cluster, also when a worker dies in mid-run."""

import os
import signal
import socket
from concurrent.futures import Executor, Future, ProcessPoolExecutor

import pytest
from folders import given_portfolio
from typer.testing import CliRunner

from lossagg.commands.app import build_app
from lossagg.cover import Cover
from lossagg.engines import executors
from lossagg.engines.book import Book, Line, PlacedCover
from lossagg.engines.dependence import CommonShock, Copula, SharedFactor
from lossagg.engines.executors import UNDER_WAY, cluster, installed_version, on_executor
from lossagg.engines.simulation import Simulation
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.errors import EnvironmentFault, InputError
from lossagg.families import Lognormal, NegativeBinomial, Poisson

distributed = pytest.importorskip("distributed", reason="the extra cluster is not installed")

BOOK = Book(
    lines=(
        Line(
            name="hull",
            frequency=NegativeBinomial(mean=2.0, dispersion=0.5),
            severity=Lognormal(mu=9.0, sigma=1.2),
        ),
        Line(name="crew", frequency=Poisson(mean=6.0), severity=Lognormal(mu=8.0, sigma=0.9)),
        Line(name="quay", frequency=Poisson(mean=0.4), severity=Lognormal(mu=11.0, sigma=1.0)),
        Line(name="cargo", frequency=Poisson(mean=1.0), severity=Lognormal(mu=9.5, sigma=1.0)),
        Line(name="tug", frequency=Poisson(mean=0.5), severity=Lognormal(mu=9.0, sigma=1.0)),
        Line(name="ferry", frequency=Poisson(mean=1.5), severity=Lognormal(mu=8.5, sigma=1.0)),
    ),
    covers=(PlacedCover(name="excess", terms=Cover(deductible=20_000.0, limit=1e5, annual_limit=2.5e5)),),
    dependences=(
        SharedFactor(name="activity", lines=("hull", "crew"), on="frequency", variance=0.1),
        CommonShock(name="gale", lines=("tug", "ferry"), rate=0.3),
        Copula(name="harbour", lines=("quay", "cargo"), correlation=0.4, degrees_of_freedom=3.0),
    ),
)
BLOCKS = 16
YEARS = (BLOCKS - 1) * BLOCK_YEARS + 17


def sampled(executor=None, progress=None, **settings):
    result = Simulation(years=YEARS, seed=5, executor=executor, **settings).book(BOOK, progress)
    return {str(subject): loss.annual.tobytes() for subject, loss in result.losses.items()}


@pytest.fixture(scope="module")
def one_thread():
    return sampled(workers=1)


@pytest.fixture(scope="module")
def two_workers():
    """A scheduler and two worker processes on this machine; a worker that dies is not started again."""
    with distributed.LocalCluster(
        n_workers=2,
        threads_per_worker=1,
        processes=True,
        host="127.0.0.1",
        dashboard_address=None,
        memory_limit=0,
        silence_logs=50,
    ) as started:
        yield started


def test_a_pool_of_processes_gives_the_same_bytes(one_thread):
    with ProcessPoolExecutor(2) as pool:
        assert sampled(pool) == one_thread


def test_a_cluster_gives_the_same_bytes(two_workers, one_thread):
    with cluster(two_workers.scheduler_address) as executor:
        assert sampled(executor) == one_thread


def test_a_worker_killed_in_mid_run_changes_no_byte(two_workers, one_thread):
    """One of the two processes is killed after the third block: what it had is computed again elsewhere."""
    with distributed.Client(two_workers.scheduler_address, set_as_default=False) as client:
        victim = sorted(client.run(os.getpid).values())[0]
    done = []

    def kill(part):
        done.append(part)
        if len(done) == 3:
            os.kill(victim, signal.SIGKILL)

    with cluster(two_workers.scheduler_address) as executor:
        assert sampled(executor, kill) == one_thread
    assert len(done) == BLOCKS
    assert done == sorted(done)
    with pytest.raises(ProcessLookupError):
        os.kill(victim, 0)


def test_the_command_line_on_a_cluster(two_workers, tmp_path):
    """`--cluster ADDRESS` writes the same assessment as threads do."""
    for name, more in (("threads", []), ("cluster", ["--cluster", two_workers.scheduler_address])):
        folder = given_portfolio(tmp_path / "portfolio")
        arguments = ["assess", str(folder), "--out", str(tmp_path / name), "--years", "70000", *more]
        result = CliRunner().invoke(build_app(), arguments)
        assert result.exit_code == 0, result.output
    one, other = ((tmp_path / name / "assessment.json").read_bytes() for name in ("threads", "cluster"))
    assert one == other


def test_a_pool_whose_process_died_is_told_in_words():
    with ProcessPoolExecutor(1) as pool, pytest.raises(EnvironmentFault, match="workers were lost"):
        on_executor(pool, _die, range(3), lambda block, result: None)


def _die(block):
    os.kill(os.getpid(), signal.SIGKILL)


def test_no_scheduler_no_traceback(monkeypatch):
    monkeypatch.setattr(executors, "CONNECT_SECONDS", 1)
    with socket.socket() as unused:
        unused.bind(("127.0.0.1", 0))
        address = f"tcp://127.0.0.1:{unused.getsockname()[1]}"
    with pytest.raises(EnvironmentFault, match="no scheduler answers") as caught, cluster(address):
        pass
    assert caught.value.exit_code == 3


def test_workers_of_another_version_are_refused(two_workers, monkeypatch):
    monkeypatch.setattr(executors, "__version__", "0.0.0")
    with pytest.raises(EnvironmentFault, match="another version"), cluster(two_workers.scheduler_address):
        pass
    assert installed_version() == "0.0.0"


class Late(Executor):
    """Finishes its work only when asked, and counts what is under way."""

    def __init__(self):
        self.most, self.now = 0, 0

    def submit(self, work, *arguments):
        self.now += 1
        self.most = max(self.most, self.now)
        future = Future()

        def result(timeout=None):
            self.now -= 1
            return work(*arguments)

        future.result = result
        return future


def test_few_blocks_are_under_way_and_they_come_in_order():
    seen, late = [], Late()
    on_executor(late, lambda block: block**2, range(100), lambda block, result: seen.append((block, result)))
    assert seen == [(block, block**2) for block in range(100)]
    assert late.most == UNDER_WAY


def test_something_else_is_no_executor():
    with pytest.raises(InputError, match=r"executor must be an executor of concurrent\.futures"):
        Simulation(executor="tcp://somewhere")
