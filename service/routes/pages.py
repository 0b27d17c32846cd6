"""The static page, the script it draws with, and the description of the calls, all without any outside
address.
"""

from __future__ import annotations

import base64
import gzip
import hashlib
import re
from functools import lru_cache
from pathlib import Path

import fastapi_offline
import plotly
from fastapi import APIRouter, FastAPI, Request, Response
from fastapi.openapi.docs import get_swagger_ui_html
from fastapi.responses import FileResponse
from fastapi.staticfiles import StaticFiles
from starlette.exceptions import HTTPException

from service.openapi import EXAMPLES

STATIC = Path(__file__).resolve().parent.parent / "static"
_DOCS_FILES = Path(fastapi_offline.__file__).resolve().parent / "static"
_PLOTLY = Path(plotly.__file__).resolve().parent / "package_data" / "plotly.min.js"

_INLINE_SCRIPT = re.compile(r"<script>(.*?)</script>", re.DOTALL)

router = APIRouter(include_in_schema=False)


@router.get("/")
async def page() -> FileResponse:
    """The page on which a person describes a body and sees its field."""
    if not (STATIC / "index.html").is_file():
        raise HTTPException(404)
    return FileResponse(STATIC / "index.html", headers={"Cache-Control": "no-cache"})


@lru_cache(maxsize=1)
def _plotly_script() -> tuple[bytes, str]:
    """Plotly's script out of its installed package, compressed once, and its entity tag."""
    script = _PLOTLY.read_bytes()
    return gzip.compress(script, 6, mtime=0), f'"{hashlib.sha256(script).hexdigest()[:32]}"'


@router.get("/static/vendor/plotly.min.js")
def plotly_script(request: Request) -> Response:
    """The script that draws the page's pictures."""
    compressed, etag = _plotly_script()
    headers = {"ETag": etag, "Cache-Control": "public, max-age=604800", "Vary": "Accept-Encoding"}
    if request.headers.get("if-none-match") == etag:
        return Response(status_code=304, headers=headers)
    media_type = "text/javascript; charset=utf-8"
    if "gzip" in request.headers.get("accept-encoding", ""):
        return Response(compressed, media_type=media_type, headers={**headers, "Content-Encoding": "gzip"})
    return Response(gzip.decompress(compressed), media_type=media_type, headers=headers)


@router.get("/docs")
async def docs(request: Request) -> Response:
    """The calls with their examples, to read and to try."""
    response = get_swagger_ui_html(
        openapi_url="/openapi.json",
        title=f"{request.app.title}: calls",
        swagger_js_url="/static/docs/swagger-ui-bundle.js",
        swagger_css_url="/static/docs/swagger-ui.css",
        swagger_favicon_url="/static/docs/favicon.png",
        # Without this the page asks an outside service to check the document.
        swagger_ui_parameters={"validatorUrl": None, "tryItOutEnabled": True, "defaultModelsExpandDepth": 0},
    )
    script = _INLINE_SCRIPT.search(bytes(response.body).decode())
    assert script is not None
    digest = base64.b64encode(hashlib.sha256(script[1].encode()).digest()).decode()
    # The page has one inline script; it alone is let through.
    request.state.script_source = f"'sha256-{digest}'"
    return response


def mount_files(app: FastAPI) -> None:
    """Serve the files of the page, its examples and the description, with entity tags."""
    app.mount("/static/docs", StaticFiles(directory=_DOCS_FILES), name="docs-files")
    app.mount("/static/examples", StaticFiles(directory=EXAMPLES, check_dir=False), name="examples")
    app.mount("/static", StaticFiles(directory=STATIC, check_dir=False), name="static")
