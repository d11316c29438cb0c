"""What can be wrong with an expression: its text, or a derivative that does not exist."""


class ExpressionError(ValueError):
    """A text is not an expression.

    Parameters
    ----------
    position : offset into the text of the character the sentence is about, counted from 0; the length of the
        text where something is missing at its end.
    sentence : what is wrong and what is expected, for the user; never quotes the text.
    """

    def __init__(self, position: int, sentence: str) -> None:
        super().__init__(position, sentence)
        self.position = position
        self.sentence = sentence

    def __str__(self) -> str:
        """The sentence with its place, counted from 1 as people count."""
        return f"At character {self.position + 1}: {self.sentence}"


class DerivativeError(ValueError):
    """A derivative was asked for that is not a function: that of a jump."""
