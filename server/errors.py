"""The few ways a job can go wrong. Imports nothing, so that every room may use it."""


class InputError(ValueError):
    """A value that cannot be computed with: the field's name, and one sentence with the value and the bound."""

    def __init__(self, field: str, sentence: str) -> None:
        """Keep both parts, so that a page can put the sentence beside the field."""
        super().__init__(f"{field}: {sentence}")
        self.field = field
        self.sentence = sentence


class Overloaded(RuntimeError):
    """More jobs are waiting than the service is willing to queue: come back in `retry_after_s`."""

    def __init__(self, retry_after_s: int) -> None:
        """Keep the waiting time for the Retry-After header."""
        super().__init__(f"the service is busy; try again in {retry_after_s} s")
        self.retry_after_s = retry_after_s
