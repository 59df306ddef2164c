"""What each method of a plan takes: the plan's methods wrapped in a clock of CPU time."""

import time
from dataclasses import replace
from types import SimpleNamespace
from typing import Any

from runner.measure.plan import Plan


def timed(plan: Plan, spent: dict[str, float]) -> Plan:
    """Return a plan whose methods note the CPU time they take, s, by their names."""

    def watched(method: Any) -> Any:
        def measure(sample: Any, options: Any) -> Any:
            start = time.process_time()
            try:
                return method.measure(sample, options)
            finally:
                spent[method.NAME] = spent.get(method.NAME, 0.0) + time.process_time() - start

        names = {name: getattr(method, name) for name in dir(method) if not name.startswith("__")}
        return SimpleNamespace(**(names | {"measure": measure}))

    captures = [
        replace(one, methods=tuple(replace(m, method=watched(m.method)) for m in one.methods)) for one in plan.captures
    ]
    return replace(plan, captures=tuple(captures))
