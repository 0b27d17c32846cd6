"""The pages: served whole from here, with no outside address."""

from __future__ import annotations

import base64
import gzip
import hashlib
import re

import httpx
import pytest

pytestmark = pytest.mark.anyio


async def test_description_of_the_calls_works_offline(client: httpx.AsyncClient) -> None:
    page = await client.get("/docs")
    assert page.headers["content-type"].startswith("text/html")
    loaded = re.findall(r'(?:src|href)="([^"]+)"', page.text)
    assert len(loaded) == 3
    for address in loaded:
        assert address.startswith("/static/docs/")
        assert (await client.get(address)).status_code == 200
    assert "http://" not in page.text
    assert "https://" not in page.text
    assert '"validatorUrl": null' in page.text
    assert "'/openapi.json'" in page.text


async def test_policy_of_the_description_lets_its_one_inline_script_through(
    client: httpx.AsyncClient,
) -> None:
    page = await client.get("/docs")
    (script,) = re.findall(r"<script>(.*?)</script>", page.text, re.DOTALL)
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    policy = page.headers["content-security-policy"]
    assert f"script-src 'self' 'sha256-{digest}';" in policy
    # Everywhere else no inline script runs.
    assert "script-src 'self';" in (await client.get("/health/live")).headers["content-security-policy"]


async def test_plot_script_comes_out_of_the_installed_package(client: httpx.AsyncClient) -> None:
    answer = await client.get("/static/vendor/plotly.min.js", headers={"Accept-Encoding": "gzip"})
    assert answer.headers["content-type"].startswith("text/javascript")
    assert answer.headers["content-encoding"] == "gzip"
    assert "max-age" in answer.headers["cache-control"]
    assert b"plotly" in answer.content[:200].lower()
    plain = await client.get("/static/vendor/plotly.min.js", headers={"Accept-Encoding": "identity"})
    assert plain.content == answer.content
    assert len(gzip.compress(plain.content[:100_000])) < 100_000
    unchanged = await client.get("/static/vendor/plotly.min.js", headers={"If-None-Match": answer.headers["etag"]})
    assert (unchanged.status_code, unchanged.content) == (304, b"")


async def test_first_page_and_its_files_have_entity_tags(client: httpx.AsyncClient) -> None:
    page = await client.get("/")
    assert page.status_code == 200
    assert page.headers["content-type"].startswith("text/html")
    loaded = re.findall(r'(?:src|href)="(/[^"#]+)"', page.text)
    assert loaded
    for address in ["/", *loaded]:
        answer = await client.get(address)
        assert answer.status_code == 200, address
        if address.startswith("/static/"):
            assert answer.headers["etag"]
