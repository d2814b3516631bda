"""The site in a real browser: a phone's width, a keyboard, with and without script."""

from urllib.parse import parse_qs, urlsplit

import pytest

PHONE = {"width": 390, "height": 844}


class Visit:
    """One visitor, and whatever went wrong while they were here."""

    def __init__(self, browser, site, script):
        self.context = browser.new_context(viewport=PHONE, java_script_enabled=script)
        self.page = self.context.new_page()
        self.site = site
        self.script = script
        self.trouble = []
        if script:
            self.context.expose_function("told", lambda what: self.trouble.append(what))
            self.context.add_init_script(
                'document.addEventListener("securitypolicyviolation", (e) => told(`policy: ${e.violatedDirective}`));'
            )
        self.page.on("console", self._said)
        self.page.on("pageerror", lambda error: self.trouble.append(f"script: {error}"))
        self.page.on("request", self._asked)
        self.page.on("requestfailed", self._failed)

    def _said(self, said):
        # Chromium reports an answer of 422 as an error of loading; that refusal is what the test asks for.
        if said.type in ("error", "warning") and "status of 422" not in said.text:
            self.trouble.append(f"console: {said.text}")

    def _failed(self, asked):
        # Who leaves a page early cuts its last requests off: that is no failure of the site.
        if asked.failure != "net::ERR_ABORTED":
            self.trouble.append(f"failed: {asked.url} {asked.failure}")

    def _asked(self, asked):
        if not asked.url.startswith((self.site, "data:")):
            self.trouble.append(f"elsewhere: {asked.url}")

    def at(self, path):
        return urlsplit(self.page.url).path == path

    def retype(self, name, value):
        """Put a value into a field by keyboard alone."""
        self.page.focus(f"#{name}")
        self.page.keyboard.press("Control+A")
        self.page.keyboard.type(value)

    def fits(self):
        """Nothing makes the page wider than the phone."""
        if not self.script:
            return True
        return self.page.evaluate("document.documentElement.scrollWidth") <= PHONE["width"]


@pytest.fixture(params=[True, False], ids=["with script", "without script"])
def visit(browser, site, request):
    made = Visit(browser, site, request.param)
    yield made
    made.context.close()
    assert made.trouble == []


def test_a_job_is_asked_refused_corrected_and_answered_by_keyboard(visit):
    page = visit.page
    assert page.goto(visit.site + "/").status == 200
    assert visit.fits()

    # as it stands: the worked example's verdict
    with page.expect_navigation():
        page.focus("#module_voc_v")
        page.keyboard.press("Enter")
    assert visit.at("/job")
    assert page.locator(".verdict h1").inner_text().startswith("Fit 1 ×")
    assert page.locator("#faults").is_visible()
    assert page.locator("#field-test").is_visible()
    assert visit.fits()

    # a slip: Vmp above Voc
    page.goto(visit.site + "/")
    visit.retype("battery_ah", "80,5")
    visit.retype("module_vmp_v", "23.5")
    with page.expect_navigation() as refused:
        page.keyboard.press("Enter")
    assert refused.value.status == 422
    assert visit.at("/job")
    sentence = page.locator("#module_vmp_v-error").inner_text()
    assert "23.5 V" in sentence
    assert "22.3 V" in sentence
    assert page.locator("#module_vmp_v").get_attribute("aria-invalid") == "true"
    assert page.input_value("#module_vmp_v") == "23.5"
    assert page.input_value("#battery_ah") == "80,5"
    assert visit.fits()

    # mended where it stands
    visit.retype("module_vmp_v", "18.4")
    with page.expect_navigation() as mended:
        page.keyboard.press("Enter")
    assert mended.value.status == 200
    assert page.locator(".verdict h1").inner_text().startswith("Fit 1 ×")
    assert parse_qs(urlsplit(page.url).query)["battery_ah"] == ["80,5"]


def test_going_back_finds_every_field_as_it_was_left(visit):
    page = visit.page
    page.goto(f"{visit.site}/")
    visit.retype("module_voc_v", "21.9")
    page.select_option("#preset", "seville")
    page.click("form.job button[type=submit] >> nth=0")
    page.wait_for_url("**/job?**")
    page.go_back()
    page.wait_for_load_state()
    assert page.input_value("#module_voc_v") == "21.9"
    assert page.input_value("#preset") == "seville"
    assert page.text_content("form.job button[type=submit] >> nth=0") == "Decide"


def test_links_under_the_verdict_reach_their_sections(visit):
    page = visit.page
    page.goto(visit.site + "/")
    page.click("text=The whole answer")
    links = page.locator("nav[aria-label='On this page'] a")
    assert links.count() >= 6
    for index in range(links.count()):
        target = links.nth(index).get_attribute("href")
        links.nth(index).click()
        assert urlsplit(page.url).fragment == target[1:]
        assert page.locator(target).is_visible()


@pytest.mark.parametrize("path", ["/diodes", "/method", "/api"])
def test_plain_pages_fit_a_phone(visit, path):
    assert visit.page.goto(visit.site + path).status == 200
    assert visit.fits()
