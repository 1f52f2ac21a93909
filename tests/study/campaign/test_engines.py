"""Engines: the same bits from one process or many workers, with workers killed; refusals in one sentence."""

import ast
import logging
import sys
from pathlib import Path

import pytest

import farhold
from farhold.errors import CaseError, DomainError, FarholdError
from farhold.study.campaign import run_campaign
from farhold.study.campaign.engines import ENGINES, engine_for
from farhold.study.campaign.job import Job
from farhold.study.campaign.plan import plan_of

ROOM = Path(farhold.__file__).parent / "study" / "campaign" / "engines"


@pytest.fixture(scope="module")
def address():
    """A scheduler with two workers, as somebody else would run it."""
    distributed = pytest.importorskip("distributed")
    with distributed.LocalCluster(
        n_workers=2,
        threads_per_worker=1,
        host="127.0.0.1",
        dashboard_address=None,
        memory_limit=None,
        silence_logs=logging.CRITICAL,
    ) as cluster:
        yield cluster.scheduler_address


def test_cluster_without_a_folder_finds_the_same(address, artificial, undisturbed):
    assert run_campaign(artificial(), cluster=address).digest == undisturbed.digest


def test_cluster_writes_the_chunks_itself_and_finds_the_same(tmp_path, address, artificial, listener, undisturbed):
    watch = listener()
    findings = run_campaign(artificial(), folder=tmp_path / "study", cluster=address, watch=watch)
    assert findings.digest == undisturbed.digest
    assert watch.done == 6
    assert watch.notes == [f"2 workers at {address}"]


def test_study_begun_here_goes_on_there(tmp_path, address, artificial, listener, undisturbed):
    with pytest.raises(FarholdError, match="interrupted"):
        run_campaign(artificial(), folder=tmp_path / "study", watch=listener(stop_after=4))
    findings = run_campaign(artificial(), folder=tmp_path / "study", resume=True, cluster=address)
    assert findings.digest == undisturbed.digest


def test_failure_of_a_worker_is_raised_here(address, artificial):
    campaign = artificial(chunks=1, size=-1)
    with pytest.raises(ValueError, match="negative dimensions"):
        run_campaign(campaign, cluster=address)


def test_fault_of_a_worker_is_raised_here_as_it_is(address, artificial):
    campaign = artificial(chunks=1, unlawful=True)
    with pytest.raises(DomainError, match="slots: chunk 0 is not lawful"):
        run_campaign(campaign, cluster=address)


@pytest.fixture
def job(tmp_path, artificial):
    """Makes the job of the artificial study: job(folder=..., machine=..., allow_mixed=...)."""
    campaign = artificial()
    plan = plan_of(campaign, ())

    def make(folder=None, machine=None, allow_mixed=False):
        return Job(campaign.compute, campaign.payload, folder, plan.digest, machine or plan.machine, allow_mixed)

    return make


def test_worker_on_another_machine_is_refused(job):
    with pytest.raises(
        CaseError, match=r"machine.cpu: worker w3 has .*, the study was begun with abacus \(the bits"
    ):
        job(machine={**job().machine, "cpu": "abacus"}).perform_there(0, "worker w3")


def test_worker_on_another_machine_can_be_allowed(job):
    mixed = job(machine={**job().machine, "cpu": "abacus"}, allow_mixed=True)
    assert set(mixed.perform_there(0, "w")) == set(job().perform(0))


def test_worker_without_the_folder_hands_the_chunk_over(tmp_path, job):
    chunk = job(folder=str(tmp_path / "not here")).perform_there(0, "w")
    assert chunk["sum"] == job().perform(0)["sum"]


def test_worker_does_not_write_into_another_study(tmp_path, job, artificial):
    run_campaign(artificial(seed=8), folder=tmp_path / "study")
    before = sorted(path.name for path in (tmp_path / "study" / "chunks").iterdir())
    assert not isinstance(job(folder=str(tmp_path / "study")).perform_there(0, "w"), str)
    assert sorted(path.name for path in (tmp_path / "study" / "chunks").iterdir()) == before


@pytest.mark.parametrize("text", ["local:0", "local:-1", "local:two", "local", "", "somewhere", "tcp://a b:1"])
def test_unlawful_cluster_is_refused(text):
    with pytest.raises(CaseError) as caught:
        engine_for(text)
    assert str(caught.value) == (
        f'--cluster: got {text!r} (allowed: local:N with N workers of this machine, or an address "host:8786")'
    )


def test_silent_address_is_said(artificial, monkeypatch):
    from farhold.study.campaign.engines import dask

    monkeypatch.setattr(dask, "_CONNECT_S", 0.3)
    with pytest.raises(FarholdError, match=r"--cluster: no scheduler answers at tcp://127.0.0.1:9 \(start one"):
        run_campaign(artificial(), cluster="tcp://127.0.0.1:9")


def test_missing_package_is_said_with_its_cure(monkeypatch):
    monkeypatch.setitem(sys.modules, "distributed", None)
    monkeypatch.delitem(sys.modules, "farhold.study.campaign.engines.dask", raising=False)
    with pytest.raises(FarholdError) as caught:
        engine_for("local:2")
    assert str(caught.value) == (
        "--cluster: needs the package 'distributed', which is not installed "
        '(python -m pip install "farhold[cluster]")'
    )


def test_room_has_one_file_per_engine():
    assert {path.stem for path in ROOM.glob("*.py")} == {module for module, _ in ENGINES.values()} | {"__init__"}


SOURCES = sorted(path for path in Path(farhold.__file__).parent.rglob("*.py") if path != ROOM / "dask.py")


def test_only_one_file_knows_the_cluster():
    knowing = [
        path.name
        for path in SOURCES
        for step in ast.walk(ast.parse(path.read_text()))
        if (isinstance(step, ast.ImportFrom) and (step.module or "").split(".")[0] in {"dask", "distributed"})
        or (isinstance(step, ast.Import) and {n.name.split(".")[0] for n in step.names} & {"dask", "distributed"})
    ]
    assert knowing == []
