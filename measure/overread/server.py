"""The page's server: requests in, the session's answers out.

Paths never come from the browser: an ECG is a number of the worklist, a picture or a file of the
page one of a few names.
"""

import json
from collections.abc import Callable, Mapping
from importlib.resources import files
from typing import Any

from starlette.applications import Starlette
from starlette.concurrency import run_in_threadpool
from starlette.middleware import Middleware
from starlette.middleware.base import BaseHTTPMiddleware
from starlette.requests import Request
from starlette.responses import JSONResponse, Response
from starlette.routing import Route

from digitize.errors import InputError
from digitize.two_places import scale_from
from measure.overread.corrections import Refused, from_plain
from measure.overread.export import EXPORTS, export
from measure.overread.guard import Guard
from measure.overread.session import Session
from measure.overread.view import overview
from measure.overread.worklist import Entry, Worklist

_TYPES = {
    ".html": "text/html",
    ".css": "text/css",
    ".js": "text/javascript",
    ".svg": "image/svg+xml",
}
_ELSEWHERE = (
    "This ECG was opened in another tab, which now has the pen. Nothing was changed here; take "
    "the pen over to go on in this tab."
)
_OUTDATED = "The record changed since this tab was drawn. Nothing was overwritten; look again."

Do = Callable[[Session, Mapping[str, Any]], None]


def make_app(worklist: Worklist, guard: Guard) -> Starlette:
    """Return the application that serves one worklist behind its guard."""
    entries = worklist.entries

    async def listing(request: Request) -> Response:
        rows = [
            {"name": e.name, "state": e.state, "stage": e.stage, "message": e.message}
            for e in entries
        ]
        return JSONResponse(rows)

    async def ecg(request: Request) -> Response:
        entry = _entry(request, entries)
        if entry is not None and entry.state == "no scale" and entry.source is not None:
            size = [entry.source.width_px, entry.source.height_px]
            return JSONResponse({"unscaled": size, "message": entry.message, "name": entry.name})
        if entry is None or entry.session is None:
            return _no("This ECG is not ready.", 404)
        tab = request.query_params.get("tab", "")
        first = not entry.tab
        if first or request.query_params.get("take") == "1":
            entry.tab = tab
        return await _shown(entry, tab)

    async def picture(request: Request) -> Response:
        entry = _entry(request, entries)
        if entry is None or entry.pictures is None:
            return _no("This ECG is not ready.", 404)
        view, size = request.path_params["view"], request.path_params["size"]
        try:
            jpeg = await run_in_threadpool(entry.pictures.jpeg, view, size)
        except KeyError:
            return _no("There is no such picture.", 404)
        return Response(jpeg, media_type="image/jpeg")

    async def change(request: Request) -> Response:
        entry, name = _entry(request, entries), request.path_params["change"]
        wish = await _wish(request)
        if wish is None:
            return _no("The request is not complete.", 400)
        if entry is not None and name == "scale" and entry.state == "no scale":
            return _scaled(worklist, entry, wish)
        if entry is None or entry.session is None or name not in (*_CHANGES, "release"):
            return _no("This ECG is not ready.", 404)
        if name == "release":  # the tab is being closed: the next one that opens has the pen
            entry.tab = "" if wish.get("tab") == entry.tab else entry.tab
            return Response(status_code=204)
        return await run_in_threadpool(_changed, entry, _CHANGES[name], wish)

    async def exported(request: Request) -> Response:
        entry, kind = _entry(request, entries), request.path_params["kind"]
        if entry is None or entry.session is None or kind not in EXPORTS:
            return _no("There is no such file.", 404)
        name, content = await run_in_threadpool(export, entry.session, kind)
        disposition = f'attachment; filename="{name}"'
        headers = {"Content-Disposition": disposition}
        return Response(content, media_type=EXPORTS[kind].media_type, headers=headers)

    routes = [
        Route("/", _page_file),
        Route("/page/{name}", _page_file),
        Route("/ecgs", listing),
        Route("/ecgs/{number:int}", ecg),
        Route("/ecgs/{number:int}/paper/{view}/{size}", picture),
        Route("/ecgs/{number:int}/export/{kind}", exported),
        Route("/ecgs/{number:int}/{change}", change, methods=["POST"]),
    ]
    return Starlette(routes=routes, middleware=[Middleware(BaseHTTPMiddleware, dispatch=guard)])


async def _wish(request: Request) -> dict[str, Any] | None:
    """What a request asks for; None where it is no JSON object."""
    try:
        wish = await request.json()
    except (json.JSONDecodeError, UnicodeDecodeError, RecursionError):
        return None
    return wish if isinstance(wish, dict) else None


def _scaled(worklist: Worklist, entry: Entry, wish: Mapping[str, Any]) -> Response:
    """Send a page without grid back to be read with the scale that was shown on it."""
    assert entry.source is not None
    try:
        points = [[float(v) for v in point] for point in wish["points"]]
        scale = scale_from(points, float(wish["mm"]), entry.source.dpi)
    except InputError as error:
        return _no(str(error), 422)
    except (KeyError, TypeError, ValueError):
        return _no("The request is not complete.", 400)
    worklist.read_with_scale(entry, scale)
    return JSONResponse({"reading": True})


def _correct(session: Session, wish: Mapping[str, Any]) -> None:
    correction = wish.get("correction")
    if not isinstance(correction, dict):
        raise Refused("the correction is not complete")
    session.correct(from_plain(correction), str(wish.get("who", "")))


def _sign(session: Session, wish: Mapping[str, Any]) -> None:
    session.sign(str(wish.get("name", "")), str(wish.get("comment", "")))


_CHANGES: Mapping[str, Do] = {
    "correct": _correct,
    "undo": lambda session, wish: session.undo(),
    "redo": lambda session, wish: session.redo(),
    "sign": _sign,
}


def _changed(entry: Entry, do: Do, wish: Mapping[str, Any]) -> Response:
    """The record after a change; it is refused where this tab does not have the pen."""
    assert entry.session is not None
    with entry.lock:
        if wish.get("tab") != entry.tab:
            return _no(_ELSEWHERE, 409)
        if wish.get("revision") != entry.session.revision:
            return _no(_OUTDATED, 409)
        try:
            do(entry.session, wish)
        except (Refused, InputError) as error:
            return _no(str(error), 422)
        return JSONResponse({**overview(entry.session), "pen": True})


async def _shown(entry: Entry, tab: str) -> Response:
    def show() -> dict[str, Any]:
        assert entry.session is not None
        with entry.lock:
            return {**overview(entry.session), "pen": entry.tab == tab}

    return JSONResponse(await run_in_threadpool(show))


def _entry(request: Request, entries: list[Entry]) -> Entry | None:
    number = request.path_params["number"]
    return entries[number] if 0 <= number < len(entries) else None


def _no(message: str, status: int) -> Response:
    return JSONResponse({"message": message}, status)


async def _page_file(request: Request) -> Response:
    """A file of the page; only names that are there are known."""
    name = request.path_params.get("name", "index.html")
    known = {file.name: file for file in (files("measure.overread") / "page").iterdir()}
    kind = _TYPES.get(name[name.rfind(".") :])
    if name not in known or kind is None:
        return _no("There is no such file.", 404)
    return Response(known[name].read_bytes(), media_type=kind)
