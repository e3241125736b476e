"""What the package carries besides its modules: static files, migrations, licences."""

import hashlib
import re
import subprocess
import sys
import zipfile
from importlib.resources import files
from pathlib import Path
from xml.etree import ElementTree

import pytest

CHECKOUT = Path(__file__).parent.parent.parent
SWAGGER_UI = CHECKOUT / "service" / "static" / "swagger-ui"


def test_the_files_of_the_api_page_are_as_they_were_published():
    rows = (SWAGGER_UI / "CHECKSUMS").read_text("ascii").splitlines()[1:]
    stated = {name: digest for digest, name in (row.split("  ") for row in rows)}
    present = {
        path.name: hashlib.sha256(path.read_bytes()).hexdigest()
        for path in SWAGGER_UI.iterdir()
        if path.name != "CHECKSUMS"
    }
    assert {"swagger-ui-bundle.js", "swagger-ui.css", "LICENSE", "NOTICE"} <= set(stated)
    assert present == stated


def test_the_icon_is_a_drawing_that_fetches_nothing():
    text = files("service").joinpath("static", "favicon.svg").read_text("utf-8")
    drawing = ElementTree.fromstring(text)  # noqa: S314 (our own file)
    assert drawing.tag == "{http://www.w3.org/2000/svg}svg"
    assert re.findall(r"href|url\(|<script|<image", text) == []


@pytest.mark.slow
def test_the_wheel_carries_migrations_static_files_and_licences(tmp_path):
    subprocess.run(
        [sys.executable, "-m", "build", "--wheel", "--no-isolation", "-o", tmp_path, CHECKOUT],
        check=True,
        capture_output=True,
        timeout=120,
    )
    (wheel,) = tmp_path.glob("rimeward-*.whl")
    with zipfile.ZipFile(wheel) as archive:
        carried = set(archive.namelist())
        info = next(name for name in carried if name.endswith(".dist-info/METADATA"))
        info = info.removesuffix("METADATA")
        entry_points = archive.read(f"{info}entry_points.txt").decode()
    assert "rimeward = service.__main__:main" in entry_points
    assert {
        f"{info}licenses/LICENSE",
        f"{info}licenses/service/static/swagger-ui/NOTICE",
    } <= carried
    in_checkout = [
        path.relative_to(CHECKOUT).as_posix()
        for top in ("service", "migrations")
        for path in (CHECKOUT / top).rglob("*")
        if path.is_file() and "__pycache__" not in path.parts
    ]
    wanted = {re.sub("^migrations/", "service/_migrations/", name) for name in in_checkout}
    assert any(name.startswith("service/_migrations/versions/") for name in wanted)
    assert wanted - carried == set()
    assert {name for name in carried if not name.startswith(("service/", info))} == set()
