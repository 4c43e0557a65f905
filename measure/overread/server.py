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
from measure.overread.beside import beside
from measure.overread.corrections import Refused
from measure.overread.corrections_json import from_plain
from measure.overread.export import KINDS, Taken, export, export_comparison
from measure.overread.guard import Guard
from measure.overread.session import Session
from measure.overread.view import overview
from measure.overread.wording import on_page
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
_PUT_AWAY = "This ECG was put away and is read again. Nothing was changed; open it once more."
_OUTDATED = "The record changed since this tab was drawn. Nothing was overwritten; look again."

Do = Callable[[Session, Mapping[str, Any]], None]


def make_app(worklist: Worklist, guard: Guard) -> Starlette:
    """Return the application that serves one worklist behind its guard."""
    answers = _Answers(worklist)
    number = "/ecgs/{number:int}"
    routes = [
        Route("/", _page_file),
        Route("/page/{name}", _page_file),
        Route("/ecgs", answers.listing),
        Route(number, answers.ecg),
        Route(number + "/paper/{view}/{level:int}/{col:int}/{row:int}", answers.tile),
        Route(number + "/export/{kind}", answers.exported),
        Route(number + "/beside/{other:int}/{how}", answers.compared),
        Route(number + "/{change}", answers.change, methods=["POST"]),
    ]
    return Starlette(routes=routes, middleware=[Middleware(BaseHTTPMiddleware, dispatch=guard)])


class _Answers:
    """What is answered about the ECGs of one worklist."""

    def __init__(self, worklist: Worklist) -> None:
        self.worklist = worklist

    async def listing(self, request: Request) -> Response:
        """The worklist, in order."""
        rows = [
            {"number": k, "name": e.item.name, "state": e.state, "stage": e.stage,
             "message": e.message}
            for k, e in self.worklist.in_order()
        ]  # fmt: skip
        return JSONResponse(rows)

    async def ecg(self, request: Request) -> Response:
        """One ECG: the record, or how far it is read; the first tab that asks has the pen."""
        entry = self._entry(request)
        if entry is None:
            return _no("There is no such ECG.", 404)
        self.worklist.want(entry)
        if entry.session is None:
            return JSONResponse(_unread(entry))
        tab = request.query_params.get("tab", "")
        first = not entry.tab
        if first or request.query_params.get("take") == "1":
            entry.tab = tab
        return await _shown(entry, tab)

    async def tile(self, request: Request) -> Response:
        """A piece of the paper."""
        entry, asked = self._entry(request), request.path_params
        pictures = None if entry is None else await run_in_threadpool(lambda: entry.pictures)
        if pictures is None:
            return _no("There is no such picture.", 404)
        place = (asked["level"], asked["col"], asked["row"])
        try:
            jpeg = await run_in_threadpool(pictures.tile, asked["view"], *place)
        except KeyError:
            return _no("There is no such picture.", 404)
        return Response(jpeg, media_type="image/jpeg")

    async def change(self, request: Request) -> Response:
        """The record after a change, or why there is none."""
        entry, name = self._entry(request), request.path_params["change"]
        wish = await _wish(request)
        if wish is None:
            return _no("The request is not complete.", 400)
        if entry is not None and name == "scale" and entry.state == "no scale":
            return _scaled(self.worklist, entry, wish)
        if entry is None or name not in (*_CHANGES, "release"):
            return _no("There is nothing to change.", 404)
        if name == "release":  # the tab is being closed: the next one that opens has the pen
            entry.tab = "" if wish.get("tab") == entry.tab else entry.tab
            return Response(status_code=204)
        self.worklist.want(entry)
        return await run_in_threadpool(_changed, entry, _CHANGES[name], wish)

    async def exported(self, request: Request) -> Response:
        """A file to take away."""
        entry, kind = self._entry(request), request.path_params["kind"]
        session = None if entry is None else entry.session
        if entry is None or session is None or kind not in KINDS:
            return _no("There is no such file.", 404)

        def take() -> Taken:
            with entry.lock:
                return export(session, kind)

        return await _taken(take)

    async def compared(self, request: Request) -> Response:
        """An earlier ECG beside this one, for the page or to take away."""
        new, old = self._entry(request), self._entry(request, "other")
        if new is None or old is None:
            return _no("There is no such ECG.", 404)
        self.worklist.want(old)
        sides = await run_in_threadpool(lambda: (old.document(), new.document()))
        if sides[0] is None or sides[1] is None:
            return JSONResponse(_unread(old))
        given = (sides[0], old.item.name, sides[1], new.item.name)
        if request.path_params["how"] == "export":
            return await _taken(lambda: export_comparison(*given))
        return JSONResponse(await run_in_threadpool(beside, *given))

    def _entry(self, request: Request, which: str = "number") -> Entry | None:
        number, entries = request.path_params[which], self.worklist.entries
        return entries[number] if 0 <= number < len(entries) else None


def _unread(entry: Entry) -> dict[str, Any]:
    """What there is of an ECG that is not read: its page, where that is open, and how far it is."""
    size = entry.source and [entry.source.width_px, entry.source.height_px]
    return {
        "unread": entry.state,
        "stage": entry.stage,
        "message": entry.message,
        "name": entry.item.name,
        "size_px": size if entry.pictures is not None else None,
    }


async def _taken(make: Callable[[], Taken]) -> Response:
    """A file to take away, or why there is none."""
    try:
        taken = await run_in_threadpool(make)
    except KeyError:
        return _no("There is no such file.", 404)
    except InputError as error:
        return _no(str(error), 422)
    headers = {"Content-Disposition": f'attachment; filename="{taken.name}"'}
    return Response(taken.content, media_type=taken.media_type, headers=headers)


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
    with entry.lock:
        if entry.session is None:
            return _no(_PUT_AWAY, 409)
        if wish.get("tab") != entry.tab:
            return _no(_ELSEWHERE, 409)
        if wish.get("revision") != entry.session.revision:
            return _no(_OUTDATED, 409)
        try:
            do(entry.session, wish)
        except (Refused, InputError) as error:
            return _no(on_page(str(error)), 422)
        return JSONResponse({**overview(entry.session), "pen": True})


async def _shown(entry: Entry, tab: str) -> Response:
    def show() -> dict[str, Any]:
        with entry.lock:
            if entry.session is None:
                return _unread(entry)
            return {**overview(entry.session), "pen": entry.tab == tab}

    return JSONResponse(await run_in_threadpool(show))


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
