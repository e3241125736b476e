"""The pages about the API: they come from the package and ask nobody outside for anything."""

from __future__ import annotations

from functools import cache
from html import escape
from typing import Final

import orjson
from fastapi import APIRouter, Request
from starlette.concurrency import run_in_threadpool
from starlette.responses import HTMLResponse, Response

from service.api.access import OPEN
from service.api.deps import JSON
from service.changes.cautions import CAUTIONS
from service.errors import RimewardError, every_problem

router = APIRouter()

# The page's parts come from here alone; its pictures lie in its own style sheet as data.
_POLICY: Final = (
    "default-src 'self'; img-src 'self' data:; style-src 'self' 'unsafe-inline'; "
    "frame-ancestors 'none'"
)
_PAGE: Final = """<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>{title}</title>
<link rel="icon" href="/static/favicon.svg">
{head}
</head>
<body>
{body}
</body>
</html>
"""
_SWAGGER_HEAD: Final = '<link rel="stylesheet" href="/static/swagger-ui/swagger-ui.css">'
_SWAGGER_BODY: Final = """<div id="swagger-ui"></div>
<script src="/static/swagger-ui/swagger-ui-bundle.js"></script>
<script src="/docs/start.js"></script>"""
# A script of its own and not in the page, which the policy would refuse.
_START: Final = """window.addEventListener("load", function () {
  window.ui = SwaggerUIBundle({
    url: "/openapi.json",
    dom_id: "#swagger-ui",
    deepLinking: true,
    validatorUrl: null,
    presets: [SwaggerUIBundle.presets.apis],
    layout: "BaseLayout"
  });
});
"""


@router.get("/docs", dependencies=[OPEN], include_in_schema=False)
async def api_page() -> Response:
    """Show the API as a page on which it can be tried."""
    page = _PAGE.format(title="Rimeward API", head=_SWAGGER_HEAD, body=_SWAGGER_BODY)
    return _page(page)


@router.get("/openapi.json", dependencies=[OPEN], include_in_schema=False)
async def api_description(request: Request) -> Response:
    """Give the description of the API (OpenAPI 3.1)."""
    document = await run_in_threadpool(request.app.openapi)
    return Response(orjson.dumps(document), 200, {"Cache-Control": "no-cache"}, JSON)


@router.get("/docs/start.js", dependencies=[OPEN], include_in_schema=False)
async def start_script() -> Response:
    """Give the script that starts the page."""
    return Response(_START, 200, {"Cache-Control": "no-cache"}, "text/javascript")


@router.get("/docs/problems", dependencies=[OPEN], include_in_schema=False)
async def problems_page() -> Response:
    """Say what each type of problem means."""
    return _page(_problems_page())


def _page(text: str) -> Response:
    headers = {"Content-Security-Policy": _POLICY, "Cache-Control": "no-cache"}
    return HTMLResponse(text, headers=headers)


@cache
def _problems_page() -> str:
    rows = "\n".join(_section(problem) for problem in every_problem())
    body = (
        "<h1>Problems</h1>\n<p>What the service refuses is answered as a problem document "
        "(RFC 9457), with one of these types. A pointer (RFC 6901) says where in the body.</p>\n"
        f"{rows}\n<h2>Cautions</h2>\n<p>{escape(CAUTIONS)}</p>"
    )
    return _PAGE.format(title="Problems", head="", body=body)


def _section(problem: type[RimewardError]) -> str:
    words = " ".join((problem.__doc__ or "").split())
    return (
        f'<section id="{escape(problem.type)}">\n<h2>{escape(problem.type)}</h2>\n'
        f"<p><strong>{problem.status}: {escape(problem.title)}.</strong> {_marked_up(words)}</p>"
        "\n</section>"
    )


def _marked_up(words: str) -> str:
    """Show what stands between grave accents as code."""
    parts = escape(words).replace("``", "`").split("`")
    shown = (f"<code>{part}</code>" if n % 2 else part for n, part in enumerate(parts))
    return "".join(shown)
