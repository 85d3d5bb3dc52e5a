"""What a browser is told when something goes wrong: a sentence, never a traceback."""

from __future__ import annotations

import logging

import flask
from flask.sansio.scaffold import Scaffold
from werkzeug.exceptions import HTTPException, RequestEntityTooLarge

from core.errors import StaleRevision, SweepbenchError

log = logging.getLogger("sweepbench")

MOST_BYTES_A_REQUEST = 64 * 1024 * 1024

_UNEXPECTED = (
    "Something in Sweepbench itself went wrong, so this was not done; your work up to here is kept. "
    "The details are in the log file in the folder where Sweepbench keeps its work."
)
_TOO_LARGE = f"That is more than {MOST_BYTES_A_REQUEST // 1024**2} MB at once. Add fewer or smaller files at a time."


def speak_plainly(server: Scaffold) -> None:
    """Answer every error of this server, or of this blueprint, with JSON {"sentence": …}."""
    server.register_error_handler(SweepbenchError, _expected)
    server.register_error_handler(RequestEntityTooLarge, lambda error: answer(_TOO_LARGE, 413))
    server.register_error_handler(HTTPException, lambda error: answer(_sentence_of(error), error.code or 500))
    server.register_error_handler(Exception, _unexpected)


def answer(sentence: str, status: int) -> flask.Response:
    """A sentence for the user, with the status for the browser."""
    response = flask.jsonify(sentence=sentence)
    response.status_code = status
    return response


def sentence_for(error: Exception) -> str:
    """The sentence that tells a user of an error; a bug goes to the log with its traceback."""
    if isinstance(error, SweepbenchError):
        return str(error)
    log.error("An unexpected error.", exc_info=error)
    return _UNEXPECTED


def _expected(error: SweepbenchError) -> flask.Response:
    return answer(str(error), 409 if isinstance(error, StaleRevision) else 400)


def _unexpected(error: Exception) -> flask.Response:
    return answer(sentence_for(error), 500)


def _sentence_of(error: HTTPException) -> str:
    if error.code == 404:
        return "There is nothing at this address."
    return "Sweepbench could not make sense of this request."
