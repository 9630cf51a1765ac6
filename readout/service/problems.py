"""Errors as ``application/problem+json`` (RFC 9457), with a detail a person can act on."""

from __future__ import annotations

import logging
from http import HTTPStatus

from fastapi import FastAPI, Request
from fastapi.exceptions import RequestValidationError
from fastapi.responses import JSONResponse
from starlette.exceptions import HTTPException

from readout.errors import BadInput, NoRoom, NotNow, ReadoutError

log = logging.getLogger(__name__)

MEDIA_TYPE = "application/problem+json"


class Problem(Exception):
    """Raised by a route: the answer is a problem with this status and detail."""

    def __init__(self, status: int, detail: str) -> None:
        super().__init__(detail)
        self.status = status
        self.detail = detail


def problem_response(status: int, detail: str) -> JSONResponse:
    """The answer that tells of a problem."""
    title = HTTPStatus(status).phrase
    body = {"type": "about:blank", "title": title, "status": status, "detail": detail}
    return JSONResponse(body, status_code=status, media_type=MEDIA_TYPE)


def answer_with_problems(app: FastAPI) -> None:
    """Make every error of ``app`` a problem."""

    async def of_route(_: Request, error: Exception) -> JSONResponse:
        match error:
            case Problem():
                return problem_response(error.status, error.detail)
            case HTTPException():
                detail = str(error.detail)
                if error.status_code == HTTPStatus.NOT_FOUND:
                    detail = "there is nothing at this address"
                response = problem_response(error.status_code, detail)
                response.headers.update(error.headers or {})
                return response
            case RequestValidationError():
                return problem_response(422, first_fault(error))
            case BadInput():
                return problem_response(422, str(error))
            case NotNow():
                return problem_response(409, str(error))
            case NoRoom():
                return problem_response(507, str(error))
            case ReadoutError():
                return problem_response(503, str(error))
            case _:
                log.error("a request failed: %s: %s", type(error).__name__, error)
                log.debug("where", exc_info=error)
                return problem_response(500, "a fault in readout itself: please report it")

    kinds: tuple[type[Exception], ...] = (
        Problem,
        HTTPException,
        RequestValidationError,
        ReadoutError,
        Exception,
    )
    for kind in kinds:
        app.add_exception_handler(kind, of_route)


def first_fault(error: RequestValidationError) -> str:
    """The first thing wrong with a request, as a line."""
    fault = error.errors()[0]
    where = ".".join(str(part) for part in fault["loc"] if part not in ("body", "query"))
    return f"{where}: {fault['msg']}" if where else str(fault["msg"])
