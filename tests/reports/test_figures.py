"""The figure: the same bytes each time, outside text as text, nothing that a page would have to fetch."""

import subprocess
import sys
import xml.etree.ElementTree as ET
from pathlib import Path

import numpy as np
import pytest

from reports import figures

SVG = "{http://www.w3.org/2000/svg}"


def log() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    time_s = np.arange(3000.0)
    return time_s, np.minimum(21.0, 16 + time_s / 300), np.where(time_s < 1500, 2.0, 2 * np.exp(-(time_s - 1500) / 400))


def test_files_are_what_their_suffix_says_and_the_same_twice(content: dict, tmp_path: Path) -> None:
    # First bytes: PNG (ISO/IEC 15948, 5.2), PDF (ISO 32000-1, 7.5.2), XML declaration (XML 1.0, 2.8).
    for kind, head in {"png": b"\x89PNG\r\n\x1a\n", "pdf": b"%PDF-", "svg": b"<?xml "}.items():
        written = []
        for number in (1, 2):
            figure = figures.charge_figure(*log(), content["findings"]["classification"], title="log 7")
            path = tmp_path / f"{number}.{kind}"
            figures.save_figure(figure, str(path), kind)
            written.append(path.read_bytes())
        assert written[0].startswith(head)
        assert written[0] == written[1]


def test_outside_text_is_drawn_as_text(content: dict, tmp_path: Path) -> None:
    stages = content["findings"]["classification"]
    stages["stages"][1]["kind"] = "$\\frac{<script>}$ 充電"
    figure = figures.charge_figure(*log(), stages, title="$x^2$ <b> \u202e садовый 充電\n\x1b")
    figures.save_figure(figure, str(tmp_path / "f.svg"), "svg")
    texts = ["".join(one.itertext()) for one in ET.parse(tmp_path / "f.svg").iter(f"{SVG}text")]
    assert "$x^2$ <b> \u202e садовый 充電 \ufffd" in texts
    assert "2 $\\frac{<script>}$ 充電" in texts


def test_a_log_too_short_is_refused_with_its_length() -> None:
    with pytest.raises(ValueError, match="at least two samples, the log has 1"):
        figures.charge_figure(np.zeros(1), np.zeros(1), np.zeros(1), {}, title="")


def test_drawing_needs_no_display_and_obeys_no_settings_of_the_user(tmp_path: Path) -> None:
    (tmp_path / "matplotlibrc").write_text("axes.labelsize: 40\nsavefig.bbox: tight\n", encoding="utf-8")
    code = (
        "import sys, warnings; warnings.simplefilter('ignore')\n"
        "import numpy as np\nfrom reports.figures import charge_figure, save_figure\n"
        "t = np.arange(9.0)\nsave_figure(charge_figure(t, t, t, {}, title='t'), sys.argv[1], 'svg')\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
    )
    for name, folder in (("theirs", tmp_path), ("ours", tmp_path.parent)):
        target = str(tmp_path / f"{name}.svg")
        subprocess.run([sys.executable, "-P", "-c", code, target], cwd=folder, check=True, timeout=60)
    assert (tmp_path / "theirs.svg").read_bytes() == (tmp_path / "ours.svg").read_bytes()
