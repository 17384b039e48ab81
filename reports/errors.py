"""What can be wrong with the tables and cells that a report is made of."""

__all__ = ["ReportError"]


class ReportError(ValueError):
    """A tidy table, a column or a cell is not what the report was promised.

    Parameters
    ----------
    where : the table, column or cell
    got : what was found there
    expected : what should stand there
    remedy : what the caller can do
    """

    def __init__(self, where: str, got: str, expected: str, remedy: str) -> None:
        super().__init__(f"{where}: got {got}, expected {expected}; {remedy}.")
        self.where = where
        self.got = got
        self.expected = expected
        self.remedy = remedy
