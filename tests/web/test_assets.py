"""Static files and the chart script."""

from __future__ import annotations

import gzip
from importlib.metadata import distribution

from flask import Flask

from tests.support.visitors import a_visitor
from web.assets import asset, chart_script_address, chart_style_ids

FOR_EVER = "public, max-age=31536000, immutable"


def test_a_static_file_is_kept_for_ever_only_under_the_mark_of_its_content(app: Flask) -> None:
    visitor = a_visitor(app)
    with app.test_request_context():
        marked = asset("weft.css")

    assert visitor.get(marked).headers["Cache-Control"] == FOR_EVER
    assert visitor.get("/static/weft.css").headers["Cache-Control"] == "public, no-cache"
    assert visitor.get("/static/weft.css?v=0123456789ab").headers["Cache-Control"] == "public, no-cache"


def test_the_chart_script_is_the_one_in_the_library_compressed_or_not(app: Flask) -> None:
    visitor = a_visitor(app)
    with app.test_request_context():
        address = chart_script_address()

    packed = visitor.get(address, Accept_Encoding="gzip")
    plain = visitor.get(address, Accept_Encoding="identity")

    wheel = distribution("plotly").locate_file("plotly/package_data/plotly.min.js")
    content = wheel.read_bytes()  # type: ignore[attr-defined]
    assert packed.headers["Content-Encoding"] == "gzip"
    assert gzip.decompress(packed.data) == content
    assert plain.data == content
    assert {packed.headers["Cache-Control"], plain.headers["Cache-Control"]} == {FOR_EVER}
    assert {packed.headers["Vary"], plain.headers["Vary"]} == {"Accept-Encoding"}
    assert {packed.mimetype, plain.mimetype} == {"text/javascript"}


def test_another_version_of_the_chart_script_is_not_here(app: Flask) -> None:
    assert a_visitor(app).get("/static/plotly-1.0.0.min.js").status_code == 404


def test_no_page_without_figures_loads_the_chart_script(app: Flask) -> None:
    assert "plotly" not in a_visitor(app).get("/sign-in").text


def test_the_styles_that_the_chart_script_adds_by_itself_are_known() -> None:
    # Were there none to find, the script would try to write one into the page, and the content policy would refuse it.
    script = distribution("plotly").locate_file("plotly/package_data/plotly.min.js")
    text = script.read_text(encoding="utf-8")  # type: ignore[call-arg]

    made_with_content = text.count(".textContent='.maplibregl-map")
    assert len(chart_style_ids()) == made_with_content == 1
