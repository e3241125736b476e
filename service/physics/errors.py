"""What a formula raises."""


class OutOfRange(ValueError):
    """An input lies outside the range in which the formula holds, or is not a number."""

    def __init__(self, parameter: str, wanted: str) -> None:
        self.parameter = parameter
        self.wanted = wanted
        super().__init__(f"{parameter} must be {wanted}")
