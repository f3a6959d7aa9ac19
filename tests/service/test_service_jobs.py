"""What happens to jobs: ended, cancelled, killed, queued; over a real socket."""

import json
import os
import signal
import threading
import time

import pytest
from running import alive, eventually, odd


def test_an_answer_is_kept_under_its_id(odd_service):
    problem = odd("quick")
    first = odd_service.post(problem)
    assert first.status_code == 200
    assert first.json()["state"] == "finished"
    again = odd_service.post(problem)
    assert again.json() == first.json()  # the worker's process id among it: solved once
    assert odd_service.get(first.json()["id"]) == first.json()


def test_a_posted_problem_in_other_words_has_the_same_id(odd_service):
    problem = odd("quick")
    spelt = problem["hamiltonian"].replace("**", "^").replace(" ", "   ")
    other = {"hamiltonian": spelt, "coordinates": ["quick"], "momenta": ["p_quick"], "time": "t"}
    assert odd_service.post(other).json()["id"] == odd_service.post(problem).json()["id"]


def test_a_running_job_is_joined_not_doubled(odd_service):
    problem = odd("nap")
    answers = []
    threads = [
        threading.Thread(target=lambda: answers.append(odd_service.post(problem).json()))
        for _ in range(4)
    ]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(answers) == 4
    assert all(answer == answers[0] for answer in answers)
    assert answers[0]["state"] == "finished"


def test_wait_decides_between_200_and_202(odd_service):
    slow = odd_service.post(odd("nap"), prefer="wait=0")
    assert slow.status_code == 202
    assert slow.headers["Preference-Applied"] == "wait=0"
    assert slow.headers["Retry-After"] == "1"
    assert slow.headers["Location"] == f"/v1/solutions/{slow.json()['id']}"
    assert slow.json()["state"] in ("queued", "running")
    assert slow.json()["problem"]["coordinates"]
    waited = odd_service.post(odd("nap"), prefer="wait=5")
    assert waited.status_code == 200
    assert waited.headers["Preference-Applied"] == "wait=5"
    assert "Retry-After" not in waited.headers
    assert odd_service.wait_state(slow.json()["id"], "finished")["verdict"]


def test_respond_async_answers_at_once(odd_service):
    problem = odd("nap")
    began = time.monotonic()
    response = odd_service.post(problem, prefer="respond-async")
    assert time.monotonic() - began < 0.35
    assert response.status_code == 202
    assert response.headers["Preference-Applied"] == "respond-async"
    odd_service.wait_state(response.json()["id"], "finished")
    late = odd_service.post(problem, prefer="respond-async")
    assert late.status_code == 202
    assert late.headers["Retry-After"] == "0"
    assert late.json()["state"] == "finished"


def test_respond_async_with_wait_waits_and_then_answers_202(odd_service):
    response = odd_service.post(odd("sleep"), prefer="respond-async, wait=1")
    assert response.status_code == 202
    assert response.elapsed.total_seconds() > 0.9
    assert response.headers["Preference-Applied"] == "respond-async, wait=1"


def test_a_hung_job_ends_at_its_deadline_while_another_answers(odd_service):
    began = time.monotonic()
    hung = odd_service.post(odd("hang"), prefer="respond-async").json()
    other = odd_service.post(odd("quick"))
    assert other.status_code == 200
    assert time.monotonic() - began < 1.0
    answer = odd_service.wait_state(hung["id"], "failed")
    assert 1.2 < time.monotonic() - began < 3.0
    detail = answer["problem_detail"]
    assert detail["title"] == "Out of time"
    assert detail["type"] == "/problems/out-of-time"
    assert "1.5 s" in detail["detail"]
    assert "integrate" in detail["detail"]
    assert answer["verdict"]["separability"] == "undecided"  # what was found before


def test_hung_jobs_on_every_slot_leave_the_service_answering(odd_service):
    names = [odd_service.post(odd("hang"), prefer="respond-async").json()["id"] for _ in range(4)]
    for path in ("/healthz", "/readyz", f"/v1/solutions/{names[0]}"):
        response = odd_service.client.get(path)
        assert response.status_code == 200
        assert response.elapsed.total_seconds() < 0.3
    refused = odd_service.post({"coordinates": ["x"], "hamiltonian": "p_x**2/2 + y"})
    assert refused.status_code == 422  # reading has a worker of its own
    assert refused.elapsed.total_seconds() < 0.5
    for name in names:
        odd_service.wait_state(name, "failed")
    assert odd_service.post(odd("quick")).json()["state"] == "finished"


def test_a_failed_job_posted_again_is_queued_anew(odd_service):
    problem = odd("hang")
    first = odd_service.post(problem).json()
    assert first["state"] == "failed"
    again = odd_service.post(problem, prefer="respond-async").json()
    assert again["id"] == first["id"]
    assert again["state"] in ("queued", "running")
    assert "problem_detail" not in again
    odd_service.wait_state(first["id"], "failed")


def test_delete_ends_a_running_job_and_keeps_what_was_found(odd_service):
    name = odd_service.post(odd("hang"), prefer="respond-async").json()["id"]
    assert eventually(lambda: odd_service.get(name).get("stage") == "integrate", 1.2)
    deleted = odd_service.client.delete(f"/v1/solutions/{name}")
    assert deleted.status_code == 200
    assert deleted.elapsed.total_seconds() < 0.3
    assert deleted.json()["state"] == "cancelled"
    assert deleted.json()["verdict"]["blocks"] == [["hang"]]
    assert odd_service.get(name)["state"] == "cancelled"


def test_delete_at_once_is_never_lost(odd_service):
    for _ in range(30):
        name = odd_service.post(odd("hang"), prefer="respond-async").json()["id"]
        deleted = odd_service.client.delete(f"/v1/solutions/{name}")
        assert deleted.json()["state"] == "cancelled"
        assert deleted.elapsed.total_seconds() < 0.5


def test_delete_of_an_ended_job_changes_nothing(odd_service):
    answer = odd_service.post(odd("quick")).json()
    deleted = odd_service.client.delete(f"/v1/solutions/{answer['id']}")
    assert deleted.status_code == 200
    assert deleted.json() == answer == odd_service.get(answer["id"])


@pytest.mark.parametrize(
    ("behaviour", "title", "says"),
    [
        ("die", "The worker died", "SIGKILL"),
        ("abort", "The worker died", "SIGABRT"),
        ("leave", "The worker died", "status 3"),
        ("hoard", "Out of memory", "600 MiB"),
        ("blunder", "A fault of this program", "nothing here"),
        ("write", "A fault of this program", "File too large"),
    ],
)
def test_how_a_solve_can_fail(odd_service, behaviour, title, says):
    response = odd_service.post(odd(behaviour))
    assert response.status_code == 200
    answer = response.json()
    assert answer["state"] == "failed"
    assert answer["problem_detail"]["title"] == title
    assert says in answer["problem_detail"]["detail"]
    assert answer["verdict"]["separability"] == "undecided"
    assert odd_service.post(odd("quick")).json()["state"] == "finished"


def test_nothing_of_a_refuted_answer_is_shown(odd_service):
    answer = odd_service.post(odd("refute")).json()
    assert answer["state"] == "failed"
    assert answer["problem_detail"]["type"] == "/problems/refuted"
    assert answer["problem_detail"]["detail"] == "the derivative of W is not p"
    assert set(answer) == {"id", "state", "stage", "problem", "problem_detail"}


def test_a_refusal_by_the_solve_ends_as_failed_with_its_place(odd_service):
    answer = odd_service.post(odd("refuse")).json()
    assert answer["state"] == "failed"
    detail = answer["problem_detail"]
    assert (detail["status"], detail["pointer"], detail["position"]) == (422, "/hamiltonian", 3)


def test_a_worker_that_used_much_memory_is_retired(start_odd):
    service = start_odd(workers=1)

    def solver(behaviour):
        return int(service.post(odd(behaviour)).json()["verdict"]["limit"])

    before = service.descendants()
    used = solver("swell")
    assert used in before
    assert eventually(lambda: not alive(used))
    assert eventually(lambda: len(service.descendants()) == len(before))


def test_progress_tells_each_stage_and_ends_with_the_job(odd_service):
    name = odd_service.post(odd("nap"), prefer="respond-async").json()["id"]
    for _ in range(2):  # as it happens, and afterwards
        with odd_service.client.stream("GET", f"/v1/solutions/{name}/progress") as response:
            assert response.headers["Content-Type"].startswith("text/event-stream")
            events = [
                tuple(line.split(": ", 1)[1] for line in block.splitlines())
                for block in "".join(response.iter_text()).strip().split("\n\n")
            ]
        assert [event for event, _ in events] == ["stage", "stage", "end"]
        contents = [json.loads(content) for _, content in events]
        assert [each["stage"] for each in contents[:2]] == ["separate", "integrate"]
        assert contents[0]["seconds"] <= contents[1]["seconds"] < 1.5
        assert contents[2] == {"state": "finished"}


def test_a_progress_stream_is_bounded(start_odd):
    service = start_odd(wait_limit_seconds=1, deadline_seconds=20)
    name = service.post(odd("sleep"), prefer="respond-async").json()["id"]
    began = time.monotonic()
    with service.client.stream("GET", f"/v1/solutions/{name}/progress") as response:
        text = "".join(response.iter_text())
    assert 0.8 < time.monotonic() - began < 3
    assert "event: end" not in text
    assert service.post(odd("sleep"), prefer="wait=100").headers["Preference-Applied"] == "wait=1"
    service.client.delete(f"/v1/solutions/{name}")


def test_the_queue_is_bounded(start_odd):
    service = start_odd(workers=1, queue_limit=2, deadline_seconds=30)
    problems = [odd("sleep") for _ in range(4)]
    answers = [service.post(problem, prefer="respond-async") for problem in problems]
    assert [answer.status_code for answer in answers] == [202, 202, 202, 429]
    full = answers[3]
    assert full.headers["Content-Type"] == "application/problem+json"
    assert 1 <= int(full.headers["Retry-After"]) <= 60
    assert service.client.get("/readyz").status_code == 503
    assert service.post(problems[0], prefer="respond-async").status_code == 202  # known: joins
    waiting = answers[1].json()["id"]
    assert service.client.delete(f"/v1/solutions/{waiting}").json()["state"] == "cancelled"
    assert service.post(problems[3], prefer="respond-async").status_code == 202
    assert service.client.get("/healthz").status_code == 200


def test_the_store_is_bounded_and_drops_the_least_recently_used(start_odd):
    service = start_odd(store_solutions=3)
    names = [service.post(odd("quick")).json()["id"] for _ in range(3)]
    service.get(names[0])
    service.post(odd("quick"))
    assert service.client.get(f"/v1/solutions/{names[1]}").status_code == 404
    assert service.get(names[0])["state"] == "finished"


def test_the_service_drains_before_it_ends(start_odd):
    service = start_odd(deadline_seconds=30, drain_seconds=3)
    problem = odd("sleep")
    name = service.post(problem, prefer="respond-async").json()["id"]
    began = time.monotonic()
    service.process.send_signal(signal.SIGTERM)
    assert eventually(lambda: service.client.get("/readyz").status_code == 503, 2)
    refused = service.post(odd("quick"))
    assert refused.status_code == 503
    assert int(refused.headers["Retry-After"]) >= 1
    assert refused.json()["type"] == "/problems/draining"
    assert service.get(name)["state"] == "running"
    assert service.process.wait(15) == 0
    assert 2.5 < time.monotonic() - began < 12


def test_a_job_that_ends_while_draining_is_answered(start_odd):
    service = start_odd(drain_seconds=5)
    answers = []
    problem = odd("nap")
    thread = threading.Thread(target=lambda: answers.append(service.post(problem)))
    thread.start()
    time.sleep(0.2)
    began = time.monotonic()
    service.process.send_signal(signal.SIGTERM)
    thread.join()
    assert answers[0].json()["state"] == "finished"
    assert service.process.wait(10) == 0
    assert time.monotonic() - began < 4


def test_kill_of_the_service_leaves_no_orphan(start_odd):
    service = start_odd(deadline_seconds=60)
    service.post(odd("hang"), prefer="respond-async")
    name = service.post(odd("sleep"), prefer="respond-async").json()["id"]
    service.wait_state(name, "running")
    children = service.descendants()
    assert len(children) == 5  # fork server, two that solve, one that reads, one spare
    service.process.kill()
    service.process.wait()
    assert eventually(lambda: not any(map(alive, children)), 5), children


def test_killed_idle_workers_are_replaced_and_cost_no_job(start_odd):
    service = start_odd()
    server = min(service.descendants())
    workers = service.descendants() - {server}
    assert len(workers) == 4
    for process in workers:
        os.kill(process, signal.SIGKILL)
    for _ in range(5):
        assert service.post(odd("quick")).json()["state"] == "finished"
    assert not workers & {each for each in service.descendants() if alive(each)}


def test_a_killed_fork_server_is_started_again(start_odd):
    service = start_odd(deadline_seconds=30)
    running = service.post(odd("sleep"), prefer="respond-async").json()["id"]
    service.wait_state(running, "running")
    server = min(service.descendants())
    os.kill(server, signal.SIGKILL)
    answer = service.wait_state(running, "failed")
    assert answer["problem_detail"]["title"] == "The worker died"
    assert service.post(odd("quick"), prefer="wait=20").json()["state"] == "finished"
    service.wait_ready()


def test_no_zombies_are_left(start_odd):
    service = start_odd()
    for _ in range(5):
        service.post(odd("die"))
    assert eventually(lambda: all(map(alive, service.descendants())))
    assert eventually(lambda: len(service.descendants()) == 5)
