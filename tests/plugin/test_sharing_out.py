"""The scheduler: blocks of operating points, crashed checks, and nobody left waiting."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import pytest

from linverify.pytest_plugin.scheduler import LARGEST_BLOCK, PointScheduling


class Worker:
    """Keeps what it is told."""

    def __init__(self, name: str) -> None:
        self.gateway = SimpleNamespace(id=name)
        self.queue: list[int] = []
        self.shutting_down = False

    def send_runtest_some(self, indices: list[int]) -> None:
        self.queue += indices

    def shutdown(self) -> None:
        self.shutting_down = True


def _scheduling(names: list[str], workers: int, dist: str = "load") -> tuple[PointScheduling, list[Worker]]:
    option = SimpleNamespace(tx=["popen"] * workers, loadscopereorder=True)
    values = {"tx": option.tx, "px": [], "dist": dist}
    config: Any = SimpleNamespace(option=option, getvalue=values.__getitem__)
    config.getoption = values.__getitem__
    scheduling = PointScheduling(config, None)
    nodes = [Worker(f"gw{number}") for number in range(workers)]
    for node in nodes:
        scheduling.add_node(node)
        scheduling.add_node_collection(node, names)
    scheduling.schedule()
    return scheduling, nodes


def _names(spec: str, points: int, checks: int = 2) -> list[str]:
    return [f"{spec}.yaml::p{point}::c{check}" for point in range(points) for check in range(checks)]


def _finish(scheduling: PointScheduling, nodes: list[Worker], names: list[str]) -> list[str]:
    """Let the workers work their queues off, as xdist does: a worker begins an item when it knows the next one."""
    done = []
    while True:
        ready = [node for node in nodes if len(node.queue) > 1 or (node.queue and node.shutting_down)]
        if not ready:
            if scheduling.tests_finished and any(node.queue for node in nodes):
                for node in nodes:
                    node.shutdown()
                continue
            return done
        for node in ready:
            index = node.queue.pop(0)
            done.append(names[index])
            scheduling.mark_test_complete(node, index)


@pytest.mark.parametrize("workers", [1, 2, 3, 5])
@pytest.mark.parametrize("points", [1, 2, 7, 40])
def test_every_item_is_run_once(workers: int, points: int) -> None:
    names = [*_names("a", points), *_names("b", 2, checks=3), "test_x.py::test_one", "test_x.py::test_two"]
    scheduling, nodes = _scheduling(names, workers)
    assert sorted(_finish(scheduling, nodes, names)) == sorted(names)


def test_a_point_is_never_split() -> None:
    names = _names("a", 100, checks=3)
    scheduling, _ = _scheduling(names, 2)
    scopes = {name: scheduling._split_scope(name) for name in names}
    for point in range(100):
        assert len({scopes[f"a.yaml::p{point}::c{check}"] for check in range(3)}) == 1


@pytest.mark.parametrize("points, size", [(1, 1), (15, 1), (31, 1), (32, 2), (100, 6), (1000, LARGEST_BLOCK)])
def test_blocks_are_neighbours_of_one_spec(points: int, size: int) -> None:
    names = [*_names("a", points), *_names("b", 3)]
    scheduling, _ = _scheduling(names, 1)
    for point in range(points):
        assert scheduling._split_scope(f"a.yaml::p{point}::c0") == f"a.yaml::block {point // size}"
    assert scheduling._split_scope("b.yaml::p0::c0") == "b.yaml::block 0"


def test_other_tests_are_single_or_by_module_as_the_mode_says() -> None:
    names = [*_names("a", 1), "test_x.py::test_one", "test_x.py::TestX::test_two"]
    single, _ = _scheduling(names, 1, "load")
    assert single._split_scope("test_x.py::test_one") == "test_x.py::test_one"
    module, _ = _scheduling(names, 1, "loadscope")
    assert module._split_scope("test_x.py::test_one") == "test_x.py"
    assert module._split_scope("test_x.py::TestX::test_two") == "test_x.py::TestX"


@pytest.mark.parametrize("workers", [1, 2])
@pytest.mark.parametrize("crash", range(12))
def test_a_crash_at_any_item_loses_that_item_only(workers: int, crash: int) -> None:
    names = _names("a", 6)
    scheduling, nodes = _scheduling(names, workers)
    doomed, done, crashed = names[crash], [], []
    for _ in range(200):
        alive = [node for node in nodes if len(node.queue) > 1 or (node.queue and node.shutting_down)]
        if not alive and scheduling.tests_finished:
            if not any(node.queue for node in nodes):
                break
            for node in nodes:
                node.shutdown()
            continue
        assert alive, "a worker waits for ever"
        node = alive[0]
        if names[node.queue[0]] == doomed:
            crashed.append(scheduling.remove_node(node))
            nodes.remove(node)
            other = Worker(f"gw{len(nodes) + 10}")
            nodes.append(other)
            scheduling.add_node(other)
            scheduling.add_node_collection(other, names)
            scheduling.schedule()
        else:
            index = node.queue.pop(0)
            done.append(names[index])
            scheduling.mark_test_complete(node, index)
    assert crashed == [doomed]
    assert sorted(done) == sorted(set(names) - {doomed})


def test_a_worker_that_ends_with_nothing_left_crashed_on_nothing() -> None:
    names = _names("a", 2)
    scheduling, nodes = _scheduling(names, 1)
    _finish(scheduling, nodes, names)
    assert scheduling.remove_node(nodes[0]) is None


def test_two_replacements_at_once_wait_for_their_own_collection() -> None:
    """The first of two new workers to finish collecting must not have work handed to the other."""
    names = _names("a", 8)
    scheduling, nodes = _scheduling(names, 2)
    for node in nodes:
        assert scheduling.remove_node(node)
    first, second = Worker("gw2"), Worker("gw3")
    scheduling.add_node(first)
    scheduling.add_node(second)
    scheduling.add_node_collection(first, names)
    scheduling.schedule()
    assert first.queue
    assert not second.queue
    assert not second.shutting_down
    scheduling.add_node_collection(second, names)
    scheduling.schedule()
    assert second.queue
    done = _finish(scheduling, [first, second], names)
    assert len(done) == len(set(done)) == len(names) - 2  # each of the dead ones took one along
