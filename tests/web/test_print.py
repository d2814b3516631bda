"""The sheet is one page on paper, whatever the job."""

import re

import pytest
from worked_jobs import CLASSES, cabin, launch, repeater, skiff

from server.web.form import DEMO
from server.web.schemas import JobIn, links_of

# Whatever makes the sheet say more: strings to fuse, an unknown controller, an active rectifier to choose, a turbine.
LONG = {"chemistry": "lifepo4", "controller": "series", "strings": 12, "other_source_v": 15, "box": "engine_room"}
JOBS = {
    "the worked example": DEMO,
    "four strings, 48 V, positive earth": JobIn(**repeater(earthing="positive")),
    "two strings behind a converter, none to fit": JobIn(**cabin()),
    "nothing safe": JobIn(**launch(box_day_c=65, rth_c_per_w=28, own_diodes=[CLASSES["S45"]])),
    "a second source": JobIn(**skiff(other_source_v=15.5)),
    "the longest words": JobIn(**{**DEMO.model_dump(exclude_unset=True), **LONG}),
}
# ISO 216 and ANSI/ASME Y14.1, in points of 1/72 inch.
PAPERS = {"A4": (210 / 25.4 * 72, 297 / 25.4 * 72), "Letter": (8.5 * 72, 11 * 72)}


@pytest.mark.parametrize("paper", PAPERS)
@pytest.mark.parametrize("story", JOBS)
def test_the_sheet_is_exactly_one_page(browser, site, story, paper):
    page = browser.new_page()
    try:
        answer = page.goto(site + links_of(JOBS[story]).sheet)
        assert answer.status == 200
        printed = page.pdf(format=paper)
    finally:
        page.close()
    assert len(re.findall(rb"/Type\s*/Page\b", printed)) == 1
    box = re.search(rb"/MediaBox\s*\[0 0 ([\d.]+) ([\d.]+)\]", printed)
    assert [float(side) for side in box.groups()] == pytest.approx(PAPERS[paper], abs=2)  # rounded to CSS pixels


def test_the_answer_prints_without_its_form_and_links(browser, site):
    page = browser.new_page()
    try:
        page.goto(site + links_of(DEMO).page)
        page.emulate_media(media="print")
        assert page.locator("h1").is_visible()
        assert page.locator("#faults").is_visible()
        for gone in ("#change", "nav[aria-label='On this page']", "main > .links"):
            assert not page.locator(gone).is_visible(), gone
    finally:
        page.close()
