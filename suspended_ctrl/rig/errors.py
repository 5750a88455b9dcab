"""What is raised when something that a user wrote cannot be taken."""


class InputError(Exception):
    """
    Bad input, said in one line.

    Parameters
    ----------
    message : str
        Names file, line, key, value and what is allowed; runs of white space, line ends
        among them, become single spaces.

    """

    def __init__(self, message: str) -> None:
        super().__init__(' '.join(message.split()))
