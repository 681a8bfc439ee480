"""One module a question: the estimator first, below it the public function."""

from unmix.solve.known import KnownSpectra

__all__ = ["KnownSpectra"]
