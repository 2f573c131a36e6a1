"""Draws without replacement: each launch gets one launch of the larger set that no other has got."""

from dataclasses import dataclass

import numpy as np

from regimes.errors import DataError

_TRIES = 50
_PILOT = 200


@dataclass(frozen=True, slots=True)
class Pools:
    """Which launches of the larger set each launch of the smaller one may get.

    Parameters
    ----------
    launch : tuple of (n,) int array
        Launches of the larger set, each once.
    row : tuple of (n,) int array
        Row of each in the table of sums.
    n_launch : int
        Launches of the larger set.
    """

    launch: tuple[np.ndarray, ...]
    row: tuple[np.ndarray, ...]
    n_launch: int

    def draw(self, n: int, rng: np.random.Generator, banned: np.ndarray | None = None) -> tuple[np.ndarray, np.ndarray]:
        """Deployments at random.

        Launches with the fewest choices go first; where they run out all the same, the deployment is drawn again.

        Parameters
        ----------
        n : int
        rng : numpy Generator
        banned : int array, optional
            Launches of the larger set that may not be drawn.

        Returns
        -------
        row, launch : (n, n_small) int arrays

        Raises
        ------
        DataError
            If the choices do not suffice.
        """
        rows, launches = (np.empty((n, len(self.launch)), int) for _ in range(2))
        todo = np.arange(n)
        for _ in range(_TRIES):
            rows[todo], launches[todo], done = self._attempt(todo.size, rng, banned)
            todo = todo[~done]
            if todo.size == 0:
                return rows, launches
        raise DataError(
            f"compare: got {len(self.launch)} groups that cannot all be given a group of their own of the larger case, "
            "twice over; each needs several with the same start separations; widen --same-place or --same-season, or "
            "use more releases"
        )

    def _attempt(self, n: int, rng: np.random.Generator, banned: np.ndarray | None):
        rows, launches = (np.empty((n, len(self.launch)), int) for _ in range(2))
        used = np.zeros((n, self.n_launch), bool)
        if banned is not None:
            used[:, banned] = True
        done = np.ones(n, bool)
        every = np.arange(n)
        for u in np.argsort([pool.size for pool in self.launch], kind="stable"):
            key = np.where(used[:, self.launch[u]], -1.0, rng.random((n, self.launch[u].size)))
            best = np.argmax(key, axis=1)
            done &= key[every, best] >= 0.0
            rows[:, u], launches[:, u] = self.row[u][best], self.launch[u][best]
            used[every, launches[:, u]] = True
        return rows, launches, done

    @property
    def effective(self) -> float:
        """Kish's effective number of launches of the larger set, by how often each is drawn."""
        if any(pool.size == 0 for pool in self.launch):
            return 0.0
        _, drawn = self.draw(_PILOT, np.random.default_rng(0))
        share = np.bincount(drawn.ravel(), minlength=self.n_launch) / drawn.size
        chance = 1.0 / drawn.size  # what so few draws add to the sum of squares
        return float(1.0 / max(np.sum(share**2) - chance, 1.0 / self.n_launch))
