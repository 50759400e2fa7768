"""Distribution over workers: a point stays on one worker, a check that killed its worker is not run again.

Why not xdist's own modes: `load` computes one point's trim once on every worker; `loadgroup` groups nothing on pytest
9.2; `loadscope` hands a check that killed its worker to the next one, until the allowed restarts are used up and
checks are left that never ran. Which worker a check runs on never changes its result, only the time it takes.
"""

from __future__ import annotations

from collections import Counter
from functools import cached_property

from xdist.scheduler import LoadScopeScheduling
from xdist.workermanage import WorkerController

LARGEST_BLOCK = 8
BLOCKS_WANTED = 16  # of one spec, so that there is something to share out between workers


class PointScheduling(LoadScopeScheduling):
    """Hands out blocks of neighbouring operating points of one spec; other tests as the chosen mode would."""

    @cached_property
    def _scopes(self) -> dict[str, str]:
        """Scope of each item of a spec; read first when the collection is complete."""
        names = next(iter(self.registered_collections.values()))
        points = list(dict.fromkeys(point for point in map(_point_of, names) if point))
        sizes = Counter(spec for spec, _ in points)
        position: Counter[str] = Counter()
        scope = {}
        for spec, name in points:
            size = max(1, min(LARGEST_BLOCK, sizes[spec] // BLOCKS_WANTED))
            scope[spec, name] = f"{spec}::block {position[spec] // size}"
            position[spec] += 1
        return {name: scope[point] for name in names if (point := _point_of(name))}

    def _split_scope(self, nodeid: str) -> str:
        if nodeid in self._scopes:
            return self._scopes[nodeid]
        # a test of somebody else: by itself, as `load` does, or with its module or class, as `loadscope` does
        return nodeid if self.config.getvalue("dist") == "load" else str(super()._split_scope(nodeid))

    def schedule(self) -> None:
        """As xdist does; a worker that replaces a dead one gets a second unit, since it starts only with two."""
        again = self.collection is not None
        super().schedule()
        if again:
            for node in self.nodes:
                self._reschedule(node)

    def _reschedule(self, node: WorkerController) -> None:
        """As xdist does, but a replacement that is still collecting is left alone; it is asked again when it has.

        Two workers that die at about the same time bring two replacements, and the first to finish collecting would
        have xdist hand work to the other, whose items are not known yet: the whole run ended in an internal error.
        """
        if node in self.registered_collections:
            super()._reschedule(node)

    def remove_node(self, node: WorkerController) -> str | None:
        """Take a worker out; the check that it died on is done, and what it had not begun goes to others.

        Units with nothing left to run are dropped: handed to an idle worker, they would leave it waiting for ever.
        """
        workload = self.assigned_work[node]
        pending = [(unit, name) for unit in workload.values() for name, done in unit.items() if not done]
        if pending:
            unit, name = pending[0]
            unit[name] = True
        for scope in [scope for scope, unit in workload.items() if all(unit.values())]:
            del workload[scope]
        super().remove_node(node)
        return pending[0][1] if pending else None


def _point_of(nodeid: str) -> tuple[str, str] | None:
    """(spec, point) of an item id `SPEC.yaml::POINT::CHECK`; None for another test."""
    parts = nodeid.split("::")
    return (parts[0], parts[1]) if len(parts) == 3 and parts[0].endswith(".yaml") else None
