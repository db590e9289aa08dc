"""The errors a user can cause; the command line turns each into one sentence and exit code 2."""


class LayoutError(Exception):
    """One sentence that names the key, the rule and the value."""


class BriefError(LayoutError):
    """The brief asks for something impossible or cannot be read."""


class FileError(LayoutError):
    """A file named by the brief is missing, damaged or of the wrong form."""


class InfeasibleError(LayoutError):
    """No layout keeps all the rules."""
