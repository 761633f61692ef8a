#!/usr/bin/python3
"""The desk as a person sees it: the whole job in a real browser, with mouse and keyboard."""

import json
import os
import pathlib
import shutil
import tempfile
import time

from selenium.webdriver.common.action_chains import ActionChains
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys

from support import Desk, Folder, QUAY, browser, main, quay_in, rondel, sheets_of, until

SLOW = 400  # seconds that a step may take on a loaded machine


class Page:
    """A browser with the desk open."""

    def __init__(self, desk, folder, **options):
        self.desk = desk
        self.driver = browser(folder, **options)
        self.driver.get(desk.address)
        self.ready()

    def ready(self):
        until(lambda: self.driver.execute_script("return document.querySelectorAll('#path button').length > 0"),
              60, "the page")

    def close(self):
        try:
            self.quiet()
        finally:
            self.driver.quit()

    def quiet(self):
        """Nothing in the console: an error there is a mistake of ours."""
        loud = [line for line in self.driver.get_log("browser") if line["level"] in ("SEVERE", "WARNING")]
        assert not loud, loud

    def find(self, selector):
        return self.driver.find_element(By.CSS_SELECTOR, selector)

    def all(self, selector):
        return self.driver.find_elements(By.CSS_SELECTOR, selector)

    def text(self, selector):
        return self.find(selector).text

    def js(self, script, *words):
        return self.driver.execute_script(script, *words)

    def station(self, name):
        """Goes to a station by its button on the path."""
        self.js("[...document.querySelectorAll('#path button')]"
                ".find((b) => b.children[1].textContent === arguments[0]).click()", name)

    def state(self, name):
        return self.js("return [...document.querySelectorAll('#path button')]"
                       ".find((b) => b.children[1].textContent === arguments[0]).children[2].textContent", name)

    def button(self, text, within="#tray"):
        found = [one for one in self.all(f"{within} button") if one.text == text]
        assert found, f"no button '{text}'"
        return found[0]

    def said(self):
        return self.text("#says")

    def point(self, view, x, y):
        """Where a place of a view (ring: pixel; plan: metres, x forward, y left) is on the screen."""
        return self.js("""
            const canvas = document.getElementById(arguments[0]);
            canvas.scrollIntoView({block: 'nearest'});
            const box = canvas.getBoundingClientRect();
            const [a, b] = arguments[0] === 'plan' ? [-arguments[2], arguments[1]] : [arguments[1], arguments[2]];
            const at = window.deskViews[arguments[0]].toScreen(a, b);
            return [box.left + at[0], box.top + at[1]];""", view, x, y)

    def click_at(self, view, x, y):
        sx, sy = self.point(view, x, y)
        action = ActionChains(self.driver, duration=0)
        action.w3c_actions.pointer_action.move_to_location(round(sx), round(sy))
        action.w3c_actions.pointer_action.click()
        action.perform()

    def drag(self, view, start, end, steps=10):
        (x0, y0), (x1, y1) = self.point(view, *start), self.point(view, *end)
        action = ActionChains(self.driver, duration=20)
        pointer = action.w3c_actions.pointer_action
        pointer.move_to_location(round(x0), round(y0))
        pointer.pointer_down()
        for i in range(1, steps + 1):
            pointer.move_to_location(round(x0 + (x1 - x0) * i / steps), round(y0 + (y1 - y0) * i / steps))
        pointer.pointer_up()
        action.perform()

    def run(self, button, station):
        self.button(button).click()
        until(lambda: self.state(station) == "fresh", SLOW, f"'{station}' fresh after '{button}'")


def the_whole_job():
    """From an empty venue to a downloaded header that equals the command line's."""
    with Folder() as folder:
        venue = folder / "hall"
        rondel("new", venue)
        for name in ("rig.yaml", "venue.yaml"):
            shutil.copy(QUAY / name, venue / name)
        desk = Desk(venue)
        page = Page(desk, folder)
        try:
            assert "dozen frames" in page.text("#next")
            # Frames, light by light, through the file chooser.
            for light in ("noon", "dusk", "lamps"):
                box = page.find("#light")
                box.clear()
                box.send_keys(light)
                images = sorted((QUAY / "frames" / light).iterdir())
                page.find("#frame-files").send_keys("\n".join(map(str, images)))
                until(lambda: len(list((venue / "frames" / light).glob("*"))) == len(images), 120, light)
            until(lambda: len(page.all("#tray .shots img")) == 36, 60, "36 small pictures")
            assert page.state("Frames") == "fresh"
            # Next, next: the bar leads.
            until(lambda: "centre" in page.text("#next"), 30, "the advice to find the centre")
            page.find("#next-run").click()
            until(lambda: page.state("Centre") == "fresh", SLOW, "the centre")
            until(lambda: page.all("#next-run"), 30, "the next step")
            page.find("#next-run").click()
            until(lambda: page.state("Mask") == "fresh", SLOW, "the mask")
            page.station("Range")
            # Marks: clicked on the ring, range and bearing typed; the first sample ones.
            marks = [line.split(",") for line in (QUAY / "marks.csv").read_text().splitlines()[1:6]]
            for number, (image, u, v, _, range_m, bearing) in enumerate(marks, 1):
                page.js("const c = document.getElementById('frame-choice'); c.value = arguments[0];"
                        "c.dispatchEvent(new Event('change'))", image)
                page.click_at("ring", float(u), float(v))
                until(lambda: page.all("#mark-range"), 30, "the form for the mark")
                page.find("#mark-range").send_keys(range_m)
                page.find("#mark-bearing").send_keys(bearing)
                page.find("#mark-add").click()
                until(lambda: len(desk.bench()["marks"]) == number, 30, f"mark {number}")
                until(lambda: not page.all("#mark-range"), 30, "the form gone")
            page.run("Fit", "Range")
            assert page.all("#curve")
            page.button("Where to measure next").click()
            until(lambda: "Measure next:" in page.text("#tray"), 60, "advice")
            # The two views are one: pointing at a pixel shows its floor place.
            page.click_at("ring", 230, 118)
            until(lambda: " m" in page.text("#reading") and "°" in page.text("#reading"), 30, "a reading")
            # Colours: one swatch of each object painted with each tool; the rest as the sheet has it.
            page.station("Colours")
            rows = [line.split(",") for line in (QUAY / "swatches.csv").read_text().splitlines()[1:]]
            discs = [row for row in rows if row[2] == "disc"][:2]
            for image, label, _, points in discs:
                u, v, radius = map(float, points.split())
                page.js("const c = document.getElementById('frame-choice'); c.value = arguments[0];"
                        "c.dispatchEvent(new Event('change'))", image)
                page.js("""for (const [id, value] of [['swatch-label', arguments[0]], ['swatch-tool', 'disc']]) {
                    const c = document.getElementById(id); c.value = value; c.dispatchEvent(new Event('change')); }""",
                        label)
                before = len(desk.bench()["swatches"])
                page.drag("ring", (u, v), (u + radius, v))
                until(lambda: len(desk.bench()["swatches"]) == before + 1, 30, "the swatch")
            page.station("Files")
            page.button("swatches.csv").click()
            page.js("""const area = document.getElementById('file-text');
                area.value += arguments[0]; area.dispatchEvent(new Event('input'));""",
                    "\n".join(",".join(row) for row in rows if row not in discs) + "\n")
            page.find("#file-save").click()
            until(lambda: len(desk.bench()["swatches"]) == len(rows), 30, "the other swatches")
            page.station("Colours")
            page.run("Search", "Colours")
            page.station("Tables")
            page.run("Make the tables", "Tables")
            until(lambda: page.all("#tray a[download]"), 30, "links to the files")
            header = next(a for a in page.all("#tray a[download]") if a.text.endswith("camera.h"))
            name = header.text
            header.click()
            got = folder / "downloads" / name
            until(lambda: got.exists() and got.stat().st_size > 0, 60, "the download")
            # The command line makes the same bytes of the same venue.
            again = folder / "again"
            shutil.copytree(venue, again)
            shutil.rmtree(again / "results")
            rondel("run", again)
            assert got.read_bytes() == (again / "results/tables" / name).read_bytes()
            # Proof: the tape sheet, typed in, and the verdict.
            page.station("Files")
            page.button("tape.csv").click()
            page.js("""const area = document.getElementById('file-text');
                area.value = arguments[0]; area.dispatchEvent(new Event('input'));""",
                    (QUAY / "tape.csv").read_text())
            page.find("#file-save").click()
            until(lambda: desk.bench()["tape_rows"] > 0, 30, "the tape sheet")
            page.station("Check")
            page.run("Check", "Check")
            until(lambda: "ccepted" in page.text("#tray"), 30, "the verdict")
            picture = next(b for b in page.all("#tray button") if b.text == "show")
            picture.click()
        finally:
            page.close()
            desk.close()


def dragging_a_mark_recomputes_once_a_frame():
    with Folder() as folder:
        desk = Desk(quay_in(folder))
        page = None
        try:
            for step in ("centre", "range"):
                assert desk.step(step, SLOW)["state"] == "fresh"
            page = Page(desk, folder)
            page.station("Range")
            mark = next(m for m in desk.bench()["marks"] if m["bearing_deg"] is not None and m["range_m"] > 0.4)
            # Two hundred steps, each put in by the page itself at the pace of the screen.
            counts = page.driver.execute_async_script("""
                const [mark, done] = [arguments[0], arguments[1]];
                const canvas = document.getElementById('ring');
                const view = window.deskViews.ring;
                const choice = document.getElementById('frame-choice');
                choice.value = mark.image;
                choice.dispatchEvent(new Event('change'));
                const counts = { asked: 0, open: 0, most: 0 };
                const plain = window.fetch;
                window.fetch = async (address, options) => {
                  if (!String(address).includes('/api/preview/range')) return plain(address, options);
                  counts.asked += 1;
                  counts.open += 1;
                  counts.most = Math.max(counts.most, counts.open);
                  try { return await plain(address, options); } finally { counts.open -= 1; }
                };
                window.deskTimings.length = 0;
                const send = (kind, u, v) => {
                  const box = canvas.getBoundingClientRect();
                  const [x, y] = view.toScreen(u, v);
                  canvas.dispatchEvent(new PointerEvent(kind, { clientX: box.left + x, clientY: box.top + y,
                    pointerId: 1, bubbles: true, isPrimary: true }));
                };
                canvas.setPointerCapture = () => {};
                setTimeout(() => {
                  send('pointerdown', mark.u_px, mark.v_px);
                  let step = 0;
                  const move = () => {
                    step += 1;
                    send('pointermove', mark.u_px + 2 * Math.sin(step / 9) + 1, mark.v_px + step / 100);
                    if (step < 200) requestAnimationFrame(move);
                    else setTimeout(() => {
                      send('pointerup', mark.u_px + 1, mark.v_px + 2);
                      counts.timings = window.deskTimings.slice();
                      done(counts);
                    }, 1500);
                  };
                  requestAnimationFrame(move);
                }, 800);""", mark)
            timings = sorted(counts.pop("timings"))
            print("    ", counts, f"new curve on screen: median {timings[len(timings) // 2]:.0f} ms, "
                  f"95th percentile {timings[int(0.95 * (len(timings) - 1))]:.0f} ms of {len(timings)}")
            assert counts["most"] == 1, counts     # none queued behind another
            assert counts["asked"] <= 201, counts  # never more than there were frames
            assert len(timings) == counts["asked"], counts  # each was shown
            until(lambda: desk.bench()["undo"] == 1, 30, "one edit for the whole drag")
        finally:
            if page:
                page.close()
            desk.close()


def undo_and_redo_by_keyboard():
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        page = Page(desk, folder)
        try:
            first = sheets_of(venue)
            page.station("Range")
            mark = desk.bench()["marks"][0]
            page.js("const c = document.getElementById('frame-choice'); c.value = arguments[0];"
                    "c.dispatchEvent(new Event('change'))", mark["image"])
            time.sleep(0.5)
            page.drag("ring", (mark["u_px"], mark["v_px"]), (mark["u_px"] + 6, mark["v_px"] + 3))
            until(lambda: sheets_of(venue) != first, 30, "the moved mark")
            moved = sheets_of(venue)
            until(lambda: page.find("#undo").is_enabled(), 30, "undo")
            page.find("body").send_keys(Keys.CONTROL, "z")
            until(lambda: sheets_of(venue) == first, 30, "undo by keyboard")
            until(lambda: page.find("#redo").is_enabled(), 30, "redo")
            page.find("#redo").click()
            until(lambda: sheets_of(venue) == moved, 30, "redo by the button")
        finally:
            page.close()
            desk.close()


def two_tabs_and_the_command_line():
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        page = Page(desk, folder)
        other = Page(desk, folder)
        try:
            for one in (page, other):
                one.station("Range")
            count = len(desk.bench()["marks"])
            # A form half filled in while the other tab works keeps what was typed.
            other.click_at("ring", 60, 60)
            until(lambda: other.all("#mark-range"), 30, "the form")
            other.find("#mark-range").send_keys("1.2")
            mark = desk.bench()["marks"][0]
            page.js("[...document.querySelectorAll('#tray button')].find((b) => b.textContent === 'pick').click()")
            until(lambda: page.all("#mark-remove"), 30, "the mark's form")
            page.find("#mark-remove").click()
            until(lambda: len(other.all("#tray tbody tr")) == count - 1, 30, "the other tab follows")
            assert other.find("#mark-range").get_attribute("value") == "1.2"
            other.find("#mark-add").click()
            until(lambda: len(desk.bench()["marks"]) == count, 30, "both edits")
            assert mark["text"] not in (venue / "marks.csv").read_text()
            # The command line works on the same venue; the page follows.
            rondel("centre", venue)
            until(lambda: page.state("Centre") == "fresh", 60, "the page follows the command line")
        finally:
            other.close()
            page.close()
            desk.close()


NAMES = """
const nameless = [];
for (const one of document.querySelectorAll('button, a[href], input, select, textarea, canvas[tabindex], [role=application], [role=img], summary, progress')) {
  if (one.closest('[hidden]')) continue;
  const labelled = one.getAttribute('aria-label') || (one.labels && [...one.labels].map((l) => l.textContent).join(' ').trim())
    || one.textContent.trim() || one.getAttribute('title');
  if (!labelled) nameless.push(one.outerHTML.slice(0, 120));
}
for (const image of document.querySelectorAll('img')) if (!image.hasAttribute('alt')) nameless.push(image.outerHTML.slice(0, 120));
const ids = [...document.querySelectorAll('[id]')].map((e) => e.id);
for (const id of ids) if (ids.indexOf(id) !== ids.lastIndexOf(id)) nameless.push('twice: ' + id);
return nameless;
"""

# WCAG 2.1: contrast of text against the nearest opaque background behind it.
CONTRAST = """
const parse = (text) => { const n = text.match(/[\\d.]+/g).map(Number); return n.length < 4 ? [...n, 1] : n; };
const luminance = (c) => { const f = c.slice(0, 3).map((x) => { x /= 255; return x <= 0.03928 ? x / 12.92 : ((x + 0.055) / 1.055) ** 2.4; });
  return 0.2126 * f[0] + 0.7152 * f[1] + 0.0722 * f[2]; };
const faint = [];
for (const one of document.querySelectorAll('body *')) {
  if (!one.checkVisibility() || ![...one.childNodes].some((n) => n.nodeType === 3 && n.textContent.trim())) continue;
  if (one.disabled || ['SCRIPT', 'STYLE', 'NOSCRIPT', 'OPTION'].includes(one.tagName)) continue;
  let behind = one;
  while (behind && parse(getComputedStyle(behind).backgroundColor)[3] < 1) behind = behind.parentElement;
  const a = luminance(parse(getComputedStyle(one).color));
  const b = luminance(parse(getComputedStyle(behind || document.documentElement).backgroundColor));
  const ratio = (Math.max(a, b) + 0.05) / (Math.min(a, b) + 0.05);
  if (ratio < 4.5) faint.push(`${ratio.toFixed(2)} ${one.tagName} ${one.textContent.trim().slice(0, 40)}`);
}
return faint;
"""

STATIONS = ("Frames", "Centre", "Mask", "Range", "Colours", "Tables", "Check", "Files")


MADE = []


def made_venue(folder):
    """The sample venue with everything made, by the command line, once for all tests."""
    if not MADE:
        MADE.append(tempfile.TemporaryDirectory(prefix="desk-made-"))
        rondel("run", quay_in(MADE[0].name))
    venue = folder / "quay"
    shutil.copytree(pathlib.Path(MADE[0].name) / "quay", venue)
    return venue


def names_contrast_and_no_sideways_scrolling():
    with Folder() as folder:
        desk = Desk(made_venue(folder))
        try:
            for dark in (False, True):
                page = Page(desk, folder, dark=dark)
                try:
                    for width in (360, 390, 768, 1280, 2560):
                        page.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", {
                            "width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False})
                        for station in STATIONS:
                            page.station(station)
                            time.sleep(0.15)
                            wide = page.js("return document.documentElement.scrollWidth - innerWidth")
                            assert wide <= 0, (station, width, wide)
                            if width in (390, 1280):
                                assert page.js(NAMES) == [], (station, page.js(NAMES))
                                assert page.js(CONTRAST) == [], (station, dark, page.js(CONTRAST))
                finally:
                    page.close()
        finally:
            desk.close()


def keyboard_alone():
    """Everything that can be done can be reached by Tab, seen when reached, and done from there."""
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        for step in ("centre", "range"):
            assert desk.step(step, SLOW)["state"] == "fresh"
        page = Page(desk, folder)
        try:
            active = "const a = document.activeElement; return "

            def press(*words):
                for word in words:
                    ActionChains(page.driver).send_keys(word).perform()

            def tab_to(condition, most=200):
                for _ in range(most):
                    press(Keys.TAB)
                    visible = page.js(active + "a === document.body || (getComputedStyle(a).outlineStyle !== 'none'"
                                      " && a.matches(':focus-visible'))")
                    assert visible, page.js(active + "a.outerHTML.slice(0, 200)")
                    if page.js(active + condition):
                        return
                raise AssertionError(condition)

            tab_to("a.className === 'skip'")
            tab_to("a.textContent.startsWith('Range')")
            press(Keys.ENTER)
            until(lambda: page.all("#mark-object"), 30, "the station")
            tab_to("a.id === 'ring'")
            before = len(desk.bench()["marks"])
            press(*[Keys.ARROW_RIGHT] * 5)
            ActionChains(page.driver).key_down(Keys.SHIFT).send_keys(Keys.ARROW_RIGHT * 6).key_up(Keys.SHIFT).perform()
            until(lambda: " m" in page.text("#reading"), 30, "a reading for the keyboard's pointer")
            press(Keys.ENTER)
            until(lambda: page.js(active + "a.id === 'mark-range'"), 30, "the form with the focus in it")
            press("1", ".", "1", Keys.TAB, "5", Keys.ENTER)
            until(lambda: len(desk.bench()["marks"]) == before + 1, 30, "the mark")
            until(lambda: page.js(active + "a.id === 'ring'"), 30, "the focus back on the ring")
            # Every control of every station can be reached.
            for station in STATIONS:
                page.station(station)
                time.sleep(0.2)
                hidden = page.js("""
                    return [...document.querySelectorAll('#tray button, #tray a, #tray input, #tray select, #tray textarea')]
                      .filter((one) => one.checkVisibility() && !one.disabled && one.tabIndex < 0).map((one) => one.outerHTML)""")
                assert hidden == [], hidden
        finally:
            page.close()
            desk.close()


def the_three_ways_in():
    with Folder() as folder:
        old = made_venue(folder)
        # New venue: the geometry is kept and verified, everything else made anew.
        new = folder / "new"
        rondel("new", new, "--from", old)
        desk = Desk(new)
        page = Page(desk, folder)
        try:
            assert page.state("Frames") == "not yet"
            assert "New venue" in page.find("#ways").get_attribute("textContent")
            assert desk.bench()["rig"]["drawing"]
        finally:
            page.close()
            desk.close()
        # Mirror changed: the drawing is changed at the desk, old and new are compared.
        changed = folder / "changed"
        shutil.copytree(old, changed)
        desk = Desk(changed)
        page = Page(desk, folder)
        try:
            page.station("Files")
            page.button("rig.yaml").click()
            page.js("""const area = document.getElementById('file-text');
                area.value = area.value.replace('value: 160', 'value: 165'); area.dispatchEvent(new Event('input'));""")
            page.find("#file-save").click()
            until(lambda: "165" in (changed / "rig.yaml").read_text(), 30, "the new drawing")
            until(lambda: page.state("Range") == "stale", 30, "a stale curve")
            page.station("Frames")
            page.js("document.getElementById('ways').open = true")
            page.find("#from-venue").send_keys(str(old))
            page.button("Compare").click()
            until(lambda: "Centre moved" in page.said() or "Centre moved" in page.text("#tray"), 60, "the comparison")
            # Batch check: another folder of images and a tape sheet.
            batch = folder / "batch"
            batch.mkdir()
            shutil.copytree(QUAY / "frames", batch / "frames")
            shutil.copy(QUAY / "tape.csv", batch / "tape.csv")
            page.find("#batch-folder").send_keys(str(batch))
            page.js("[...document.querySelectorAll('#ways button')].find((b) => b.textContent === 'Check').click()")
            until(lambda: (batch / "results/check.json").exists(), SLOW, "the batch's verdict")
            assert "accepted" in json.loads((batch / "results/check.json").read_text())
        finally:
            page.close()
            desk.close()


def pictures():
    """Pictures of the page for the README and for whoever looks; into RONDEL_PICTURES."""
    out = os.environ.get("RONDEL_PICTURES")
    if not out:
        return
    out = pathlib.Path(out)
    out.mkdir(parents=True, exist_ok=True)
    with Folder() as folder:
        desk = Desk(made_venue(folder))
        try:
            for dark in (False, True):
                page = Page(desk, folder, dark=dark)
                try:
                    for width, height in ((390, 844), (1280, 860), (2560, 1300)):
                        page.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", {
                            "width": width, "height": height, "deviceScaleFactor": 1, "mobile": False})
                        for station in STATIONS:
                            page.station(station)
                            page.js("scrollTo(0, 0)")
                            time.sleep(0.6)
                            page.click_at("ring", 232, 96)
                            time.sleep(1.0)
                            if width == 390:
                                page.js("scrollTo(0, 0)")
                            name = f"{station.lower()}-{width}{'-dark' if dark else ''}.png"
                            if width == 390:
                                tall = page.js("return document.documentElement.scrollHeight")
                                page.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", {
                                    "width": width, "height": min(tall, 4000), "deviceScaleFactor": 1, "mobile": False})
                                time.sleep(0.5)
                            page.driver.save_screenshot(str(out / name))
                            if width == 390:
                                page.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", {
                                    "width": width, "height": height, "deviceScaleFactor": 1, "mobile": False})
                finally:
                    page.close()
        finally:
            desk.close()


if __name__ == "__main__":
    main([the_whole_job, dragging_a_mark_recomputes_once_a_frame, undo_and_redo_by_keyboard,
          two_tabs_and_the_command_line, names_contrast_and_no_sideways_scrolling, keyboard_alone,
          the_three_ways_in, pictures])
