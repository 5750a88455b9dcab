"""What is raised when something that a user wrote cannot be taken."""


class InputError(Exception):
    """
    Bad input, said in one line.

    Parameters
    ----------
    message : str
        Names file, line, key, value and what is allowed; runs of white space, line ends
        among them, become single spaces, and what cannot be printed is escaped.

    """

    def __init__(self, message: str) -> None:
        line = ' '.join(message.split())
        super().__init__(''.join(c if c.isprintable() else ascii(c)[1:-1] for c in line))
