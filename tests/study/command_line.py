"""Commands run in this process as the installed ones would, for tests of what they print."""

import contextlib
import io
import json
import sys
from unittest import mock

from study.commands import main


class Done:
    """What a command left behind."""

    def __init__(self, code, out, err):
        self.code, self.out, self.err = code, out, err

    @property
    def json(self):
        assert self.code == 0, self.err
        return json.loads(self.out)


def command(*words) -> Done:
    """Run `holdtight WORDS`."""
    out, err, code = io.StringIO(), io.StringIO(), 0
    with (
        mock.patch.object(sys, "argv", ["holdtight", *map(str, words)]),
        contextlib.redirect_stdout(out), contextlib.redirect_stderr(err),
    ):  # fmt: skip
        try:
            main()
        except SystemExit as end:
            code = end.code or 0
    return Done(code, out.getvalue(), err.getvalue())


def refused(*words) -> str:
    """The words of a command that has to end with exit code 2 and a line or two."""
    done = command(*words)
    assert done.code == 2 and not done.out, (done.out, done.err)
    assert "Traceback" not in done.err and len(done.err.strip().splitlines()) <= 3
    return done.err
