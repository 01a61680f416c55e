"""axe-core, which checks accessibility, run in a page as axe-playwright-python ships it."""

from __future__ import annotations

from functools import cache
from importlib.resources import files
from typing import Any

from playwright.sync_api import Page

#: Rules of WCAG 2.0, 2.1 and 2.2 at levels A and AA, and the checker's own of good practice.
RULES = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]


@cache
def _source() -> str:
    return (files("axe_playwright_python") / "axe.min.js").read_text(encoding="utf-8")


_RUN = """async rules => {
  const options = {runOnly: {type: "tag", values: rules}, resultTypes: ["violations"]};
  const {violations, passes} = await axe.run(options);
  return {violations, looked_at: passes.length};
}"""


def violations(page: Page) -> list[str]:
    """What breaks a rule on a page, with the elements that break it."""
    page.evaluate(_source())
    found: dict[str, Any] = page.evaluate(_RUN, RULES)
    assert found["looked_at"] > 10  # rules did apply
    return [
        f"{each['id']}: {each['help']}: {node['html'][:200]} {node['failureSummary'][:300]}"
        for each in found["violations"]
        for node in each["nodes"]
    ]
