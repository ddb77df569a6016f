"""The errors that people see: where, what, what is allowed, what to do."""


class Refusal(Exception):
    """An input that cannot be used; one sentence a person can act on, never a traceback."""

    status = 2
    """Exit status of a command that ends with it."""

    def __init__(self, where: str, what: str, allowed: str = "", remedy: str = "") -> None:
        self.where, self.what, self.allowed, self.remedy = where, what, allowed, remedy
        super().__init__(self.message())

    def message(self) -> str:
        """The whole message: `where: what. Allowed: … . Remedy.`"""
        parts = [f"{self.where}: {_sentence(self.what)}"]
        if self.allowed:
            parts.append(_sentence(f"Allowed: {self.allowed}"))
        if self.remedy:
            parts.append(_sentence(self.remedy))
        return " ".join(parts)


class NotEstimable(Refusal):
    """A well-formed request that the data cannot answer, such as a constant outcome."""

    status = 3


def _sentence(text: str) -> str:
    return text if text.endswith((".", "?", "!")) else text + "."
