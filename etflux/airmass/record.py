"""What the real world's days hand to the other worlds."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from etflux.airmass.march import Course
from etflux.column import LAYER_MASS


@dataclass
class RealDays:
    """Carried tags and kept air of every morning, temperature and depth by heat of every hour; lists by day."""

    carried: list[np.ndarray] = field(default_factory=list)  # (county, layer)
    kept: list[np.ndarray] = field(default_factory=list)  # (county, layer)
    theta_k: list[np.ndarray] = field(default_factory=list)  # (county, hour + 1)
    heat_m: list[np.ndarray] = field(default_factory=list)  # (county, hour + 1)

    def keep(self, course: Course) -> None:
        """Add a day."""
        carried = np.zeros((len(course.carried), len(LAYER_MASS)))
        carried[:, : course.carried.shape[1]] = course.carried
        self.carried.append(carried)
        self.kept.append(np.ones_like(carried) if course.kept is None else course.kept)
        self.theta_k.append(course.theta_k)
        self.heat_m.append(course.depths.metres(course.depths.by_heat))

    def clear(self) -> None:
        """Let the memory go."""
        for days in (self.carried, self.kept, self.theta_k, self.heat_m):
            days.clear()
