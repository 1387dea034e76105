"""The page in a headless browser, where one is installed: it opens, nothing runs over its edge."""

import re
import shutil
import subprocess

import pytest

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
PROBE = """<!DOCTYPE html><html><body style="margin:0">
<iframe id="f" src="report.html" style="border:0;width:%dpx;height:2000px"></iframe>
<script>
document.getElementById("f").onload = () => {
  const d = document.getElementById("f").contentDocument, w = d.documentElement, images = [...d.images];
  const over = [...d.querySelectorAll("body *")].filter(e =>
    e.getBoundingClientRect().right > w.clientWidth + 1 && !e.closest(".scroll") && !e.closest(".skip"));
  document.body.dataset.answer = [w.scrollWidth - w.clientWidth, over.length, images.length,
    images.filter(i => i.naturalWidth > 50).length].join(" ");
};
</script></body></html>"""


@pytest.mark.skipif(CHROMIUM is None, reason="no chromium on this machine")
@pytest.mark.parametrize("width", [1280, 768])
def test_page_fits_the_screen(report, width, tmp_path):
    page = report.paths[0]
    probe = page.with_name(f"probe_{width}.html")
    probe.write_text(PROBE % width, encoding="utf-8")
    command = [
        str(CHROMIUM), "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
        "--disable-background-networking", "--disable-component-update", "--disable-sync", "--allow-file-access-from-files",
        f"--user-data-dir={tmp_path}", "--virtual-time-budget=8000", "--dump-dom", probe.as_uri(),
    ]  # fmt: skip
    answer = subprocess.run(command, capture_output=True, text=True, timeout=120, check=False)
    probe.unlink()
    found = re.search(r'data-answer="(-?\d+) (\d+) (\d+) (\d+)"', answer.stdout)
    assert found, answer.stderr[-500:]
    overflow, outside, images, loaded = (int(number) for number in found.groups())
    assert overflow <= 0 and outside == 0
    assert images == loaded == len(report.pictures)
