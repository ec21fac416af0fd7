#!/usr/bin/env python3
"""The grading page in a real browser: Chromium without a window, through WebDriver.

    grading_page_test.py PROGRAM
        makes pages of small drawn pictures with PROGRAM (laygauge) and uses them as a person would
    grading_page_test.py PROGRAM --screenshots docs/pictures --results results
        takes the pictures of docs/grading.md: pages of the sample plates, scored into results/
"""

import argparse
import base64
import csv
import io
import json
import re
import shutil
import subprocess
import sys
import tempfile
import time
import unittest
from pathlib import Path

from PIL import Image, ImageDraw
from selenium import webdriver
from selenium.webdriver.chrome.service import Service
from selenium.webdriver.common.action_chains import ActionChains
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys

PROJECT = Path(__file__).resolve().parents[2]
PROGRAM = "laygauge"
BATCH = "kestrel"
WELLS = ["A1", "A2", "A3", "B1", "B2", "B3"]
WIDTH_MM = 22.0
CSS_PX_PER_MM = 16  # at 100 %, GradingPageOptions


def make_results(folder):
    """A folder as `laygauge score` writes it: six coupons, a seventh that could not be measured."""
    (folder / "pictures").mkdir(parents=True)
    rows = ["batch,well,flow_pct,status,note,takes,score,score_sd"]
    for i, well in enumerate(WELLS):
        # One of them at another resolution: it must come out as large as the others.
        px_per_mm = 10 if well == "B1" else 20
        size = round(WIDTH_MM * px_per_mm)
        picture = Image.new("L", (size, size), 120)
        pen = ImageDraw.Draw(picture)
        for x in range(0, size, size // (8 + 3 * i)):
            pen.line([(x, 0), (x, size)], fill=180, width=3)
        picture.save(folder / "pictures" / f"{BATCH}-{well}.png",
                     dpi=(px_per_mm * 25.4, px_per_mm * 25.4))
        rows.append(f"{BATCH},{well},{91.37 + i},ok,,1,{3.17 + i:.2f},0.41")
    rows.append(f"{BATCH},C1,99.37,retake,too dark,1,,")
    (folder / "scores.csv").write_text("\n".join(rows) + "\n")
    return folder


def start_browser(folder):
    options = webdriver.ChromeOptions()
    options.binary_location = shutil.which("chromium") or "/usr/bin/chromium"
    for flag in ("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-quic",
                 "--no-first-run", "--disable-background-networking",
                 "--disable-component-update", "--disable-sync", "--disable-dev-shm-usage",
                 "--hide-scrollbars", "--window-size=1280,800",
                 f"--user-data-dir={folder / 'profile'}"):
        options.add_argument(flag)
    (folder / "downloads").mkdir(exist_ok=True)
    options.add_experimental_option("prefs", {
        "download.default_directory": str(folder / "downloads"),
        "download.prompt_for_download": False})
    options.set_capability("goog:loggingPrefs", {"performance": "ALL"})
    service = Service(shutil.which("chromedriver") or "/usr/bin/chromedriver")
    browser = webdriver.Chrome(service=service, options=options)
    browser.set_page_load_timeout(120)
    return browser


class Page:
    """What a person sees and does."""

    def __init__(self, browser, file, downloads):
        self.browser, self.file, self.downloads = browser, file, downloads
        self.browser.get(file.as_uri())

    def script(self, text, *arguments):
        return self.browser.execute_script("return " + text, *arguments)

    def element(self, name):
        return self.browser.find_element(By.ID, name)

    def keys(self, *keys):
        for key in keys:
            ActionChains(self.browser, duration=0).send_keys(key).perform()

    def shifted(self, key):
        ActionChains(self.browser, duration=0).key_down(Keys.SHIFT).send_keys(key) \
            .key_up(Keys.SHIFT).perform()

    def click(self, name):
        self.element(name).click()

    def begin(self, grader):
        self.element("grader").send_keys(grader + Keys.ENTER)

    def grade_button(self, grade):
        return self.browser.find_element(By.CSS_SELECTOR, f"#grades button[value='{grade:g}']")

    def shown(self):
        """Names of the pictures that are shown, by their bytes."""
        urls = self.script("[...document.querySelectorAll('#frame img')].map(i => i.src)")
        pictures = {p.read_bytes(): p.stem.split("-")[1]
                    for p in (self.file.parent / "pictures").glob("*.png")}
        return [pictures[base64.b64decode(url.split(",")[1])] for url in urls]

    def chosen(self):
        grade = self.script("document.querySelector('#grades [aria-checked=true]')?.value ?? null")
        return None if grade is None else float(grade)

    def progress(self):
        at, count = re.fullmatch(r"(\d+) of (\d+)", self.element("progress").text).groups()
        return int(at), int(count)

    def saved(self, name):
        """Rows of a file that was just saved."""
        file = self.downloads / name
        for _ in range(200):
            if file.exists() and file.stat().st_size > 0:
                break
            time.sleep(0.1)
        text = file.read_text(encoding="utf-8")
        return list(csv.reader(io.StringIO(text)))


class GradingPageTest(unittest.TestCase):
    maxDiff = None

    @classmethod
    def setUpClass(cls):
        cls.folder = Path(tempfile.mkdtemp(prefix="laygauge-page-"))
        cls.browser = start_browser(cls.folder)

    @classmethod
    def tearDownClass(cls):
        cls.browser.quit()
        shutil.rmtree(cls.folder, ignore_errors=True)

    def setUp(self):
        self.results = make_results(self.folder / self.id().split(".")[-1])
        self.browser.execute_cdp_cmd("Emulation.clearDeviceMetricsOverride", {})

    def tearDown(self):
        for file in (self.folder / "downloads").iterdir():
            file.unlink()

    def run_program(self, *arguments):
        done = subprocess.run([PROGRAM, *arguments], text=True, capture_output=True, check=False)
        self.assertEqual(done.returncode, 0, done.stderr)
        return done.stdout

    def page(self, *options):
        self.run_program("grade", self.results, *options)
        page = Page(self.browser, self.results / "grading.html", self.folder / "downloads")
        page.script("localStorage.clear()")  # what another test's grader gave
        return Page(self.browser, self.results / "grading.html", self.folder / "downloads")

    def test_grades_are_given_kept_changed_and_saved(self):
        # With this seed the grades below contradict each other by 1.5 at most.
        page = self.page("--seed", "2", "--repeats", "2")
        page.begin("ash")
        self.assertEqual(page.progress(), (1, 8))  # six coupons, two of them twice
        given = []

        def grade(value):
            self.assertEqual(page.chosen(), value)
            given.append([page.shown()[0], value])

        page.keys("7")
        grade(7)
        page.keys(Keys.ENTER, "0")
        grade(10)
        page.keys(Keys.ARROW_RIGHT, "4", ".")
        grade(4.5)
        page.click("next")
        page.grade_button(8.5).click()
        grade(8.5)
        page.click("next")

        # The tab is closed, and the page opened again later.
        self.browser.switch_to.new_window("tab")
        new_tab = self.browser.current_window_handle
        for tab in self.browser.window_handles:
            if tab != new_tab:
                self.browser.switch_to.window(tab)
                self.browser.close()
        self.browser.switch_to.window(new_tab)
        page = Page(self.browser, page.file, page.downloads)
        self.assertEqual(page.element("who").text, "ash")
        self.assertEqual(page.progress(), (5, 8))
        self.assertIsNone(page.chosen())

        page.keys("2", Keys.ARROW_UP, Keys.ARROW_UP)
        grade(3)
        page.keys(Keys.ENTER, Keys.ARROW_DOWN)
        grade(5.5)
        page.keys(Keys.ENTER, "1", Keys.ARROW_DOWN)
        grade(1)  # never below 1
        page.keys(Keys.ENTER, "0", Keys.ARROW_UP)
        grade(10)  # nor above 10

        # Back to the third by keys and mouse, another grade, and on to the end.
        page.keys(*[Keys.ARROW_LEFT] * 4)
        page.click("back")
        self.assertEqual(page.progress(), (3, 8))
        self.assertEqual(page.chosen(), 4.5)
        page.keys("5")
        given[2][1] = 5
        page.keys(*[Keys.ENTER] * 6)
        self.assertIn("All 8 judgements", page.element("summary").text)
        self.assertNotIn("twice", self.browser.find_element(By.TAG_NAME, "body").text)
        page.keys(Keys.ENTER)  # "Save the file" has the focus
        rows = page.saved("grades-ash.csv")
        self.assertEqual(rows[0], ["grader", "batch", "well", "grade"])
        self.assertEqual(rows[1:], [["ash", BATCH, well, f"{value:.1f}"] for well, value in given])
        wells = [row[2] for row in rows[1:]]
        self.assertEqual(set(wells), set(WELLS))  # not the one that could not be measured
        self.assertEqual(sum(wells.count(well) == 2 for well in WELLS), 2)

        # Told after the file was saved, never before.
        apart = [abs(a[1] - b[1]) for i, a in enumerate(given) for b in given[:i] if a[0] == b[0]]
        self.assertIn(f"{sum(apart) / 2:.2f} apart", page.element("saved").text)
        self.check_program_reads(page.downloads / "grades-ash.csv")

    def check_program_reads(self, file):
        # A second grader, so that there is something to agree with.
        other = file.with_name("other.csv")
        other.write_text(file.read_text().replace("ash,", "birch,"))
        self.assertIn("ash", self.run_program("agree", file, other))

    def test_a_slip_is_pointed_out_after_saving(self):
        page = self.page("--repeats", "1")
        page.begin("ash")
        seen = {}
        for at in range(1, 8):
            well = page.shown()[0]
            again = well in seen
            seen.setdefault(well, at)
            if again:
                slip = f"Pictures {seen[well]} and {at} are one coupon, graded 3 and 7"
            page.keys("7" if again else "3", Keys.ENTER)
        self.assertNotIn("Pictures", page.element("done").text)
        page.click("save")
        self.assertIn(slip, page.element("saved").text)

    def test_by_keyboard_alone(self):
        page = self.page("--repeats", "1")
        page.keys("c", "e", "d", "a", "r", Keys.ENTER)  # the name's field has the focus
        wells = []
        for at in range(7):
            wells.append(page.shown()[0])
            page.keys("6", Keys.ENTER)
        page.keys(Keys.ENTER)
        self.assertEqual(page.saved("grades-cedar.csv")[1:],
                         [["cedar", BATCH, well, "6.0"] for well in wells])
        page.shifted(Keys.TAB)
        page.keys(Keys.ENTER)  # "Go back"
        self.assertTrue(page.element("judge").is_displayed())
        # Tab passes every button but the grades, of which one is enough: arrows move among them.
        reached = set()
        for _ in range(40):
            page.keys(Keys.TAB)
            reached.add(page.script("document.activeElement.id || document.activeElement.value"))
        for name in ("back", "next", "smaller", "larger", "finish", "6"):
            self.assertIn(name, reached)
        # Space presses the button that has the focus.
        self.browser.execute_script("document.getElementById('finish').focus()")
        page.keys(" ")
        self.assertTrue(page.element("done").is_displayed())

    def test_zoom_and_pan_by_keys_and_mouse_at_one_scale(self):
        page = self.page("--repeats", "0")
        page.begin("ash")
        width = "document.querySelector('#frame img').getBoundingClientRect().width"
        widths = set()
        for _ in range(6):
            zoom = int(page.element("zoom").text.rstrip(" %")) / 100
            # Half a CSS pixel: the browser's rounding.
            self.assertAlmostEqual(page.script(width), WIDTH_MM * CSS_PX_PER_MM * zoom, delta=0.5)
            widths.add(page.shown()[0])
            page.keys("5", Keys.ENTER)
        self.assertEqual(widths, set(WELLS))  # one of them has fewer pixels a millimetre
        page.click("return")
        before = page.script(width)
        page.keys(*["+"] * 12)
        largest = page.script(width)
        self.assertGreater(largest, 2 * before)
        self.assertFalse(page.element("larger").is_enabled())
        scroll = "document.querySelector('.view').scrollLeft"
        at = page.script(scroll)
        page.shifted(Keys.ARROW_RIGHT)
        self.assertGreater(page.script(scroll), at)
        at = page.script(scroll)
        view = self.browser.find_element(By.CLASS_NAME, "view")
        ActionChains(self.browser, duration=0).click_and_hold(view).move_by_offset(60, 0) \
            .release().perform()
        self.assertEqual(page.script(scroll), at - 60)  # the surface follows the mouse
        self.assertEqual(page.chosen(), 5)              # and nothing else happens
        page.click("smaller")
        self.assertLess(page.script(width), largest)

    def test_is_blind_and_states_its_seed(self):
        page = self.page("--seed", "271", "--repeats", "2")
        page.begin("ash")
        table = (self.results / "scores.csv").read_text()
        told = {cell for row in csv.reader(io.StringIO(table)) for cell in row[:3] + row[6:]
                if cell} - {"batch", "well"}
        self.assertGreater(len(told), 15)
        seen = """[document.title, document.body.innerText,
            ...[...document.body.querySelectorAll('*')].flatMap(e => e.tagName === 'SCRIPT' ? [] :
                [...e.attributes].filter(a => a.name !== 'src').map(a => a.value))].join('\\n')"""
        for _ in range(8):
            text = page.script(seen)
            self.assertIn("seed 271", text)
            for name in told:
                self.assertIsNone(re.search(rf"\b{re.escape(name)}\b", text), name)
            page.keys("5", Keys.ENTER)

    def test_asks_nothing_of_the_network(self):
        self.browser.get_log("performance")
        page = self.page()
        page.begin("ash")
        page.keys("5", Keys.ENTER)
        page.click("finish")
        page.click("save")
        page.saved("grades-ash.csv")
        requests = [message["params"]["request"]["url"]
                    for entry in self.browser.get_log("performance")
                    for message in [json.loads(entry["message"])["message"]]
                    if message["method"] == "Network.requestWillBeSent"]
        self.assertIn(page.file.as_uri(), requests)
        for url in requests:
            self.assertRegex(url, "^(file|data|blob):")
        text = page.file.read_text(encoding="utf-8")
        self.assertIsNone(re.search(r"https?://|//[a-z]+\.", text))

    def check_all_reachable(self, page):
        width = page.script("document.documentElement.clientWidth")
        self.assertLessEqual(page.script("document.documentElement.scrollWidth"), width)
        buttons = [b for b in self.browser.find_elements(By.CSS_SELECTOR, "button, input")
                   if b.is_displayed()]
        self.assertGreater(len(buttons), 0)
        for button in buttons:
            # In view after scrolling down to it, whole across, and covered by nothing.
            self.assertTrue(page.script("""(b => {
                b.scrollIntoView({block: 'center'});
                const box = b.getBoundingClientRect();
                const on = document.elementFromPoint(box.x + box.width / 2, box.y + box.height / 2);
                return box.left >= 0 && box.right <= innerWidth && box.top >= 0 &&
                    box.bottom <= innerHeight && box.height >= 24 && box.width >= 24 && on === b;
                })(arguments[0])""", button), button.get_attribute("outerHTML"))

    def test_works_at_200_percent_and_on_a_phone(self):
        # A browser's zoom of 200 % halves the page's CSS pixels. 24 CSS pixels: the least size of
        # a target in WCAG 2.2, 2.5.8.
        for mode in ([], ["--pairs", "--count", "5"]):
            for width, height, touch in ((640, 400, False), (360, 640, True)):
                self.browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", {
                    "width": width, "height": height, "deviceScaleFactor": 2, "mobile": touch})
                page = self.page("--seed", str(width), *mode)
                self.check_all_reachable(page)
                page.begin("ash")
                self.check_all_reachable(page)
                # The picture is seen without scrolling sideways, and no smaller than a third of
                # the window.
                box = page.script("(b => [b.left, b.right])("
                                  "document.querySelector('.view').getBoundingClientRect())")
                self.assertGreaterEqual(box[0], 0)
                self.assertLessEqual(box[1], width)
                self.assertGreater(box[1] - box[0], width / 3)
                if mode:
                    self.assertEqual(page.element("left").text,
                                     "Upper is better" if touch else "Left is better")
                target = page.element("left") if mode else page.grade_button(3)
                self.tap(target) if touch else target.click()
                if not mode:
                    self.assertEqual(page.chosen(), 3)
                    page.click("next")
                self.assertEqual(page.progress()[0], 2)
                page.click("finish")
                self.check_all_reachable(page)

    def tap(self, target):
        self.browser.execute_script("arguments[0].scrollIntoView({block: 'center'})", target)
        at = self.browser.execute_script(
            "const b = arguments[0].getBoundingClientRect();"
            "return {x: b.x + b.width / 2, y: b.y + b.height / 2}", target)
        for kind, points in (("touchStart", [at]), ("touchEnd", [])):
            self.browser.execute_cdp_cmd("Input.dispatchTouchEvent",
                                         {"type": kind, "touchPoints": points})

    def test_pairs_are_asked_kept_changed_and_saved(self):
        page = self.page("--pairs", "--count", "7", "--seed", "3")
        page.begin("ash")
        self.assertEqual(page.progress(), (1, 7))
        told = []

        def answer(side, do):
            shown = page.shown()
            told.append([shown[side], shown[1 - side]] if side is not None else None)
            do()

        answer(0, lambda: page.keys(Keys.ARROW_LEFT))
        answer(1, lambda: page.keys(Keys.ARROW_RIGHT))
        answer(None, lambda: page.keys(Keys.ARROW_DOWN))
        answer(1, lambda: page.click("right"))
        self.assertEqual(page.progress(), (5, 7))
        page = Page(self.browser, page.file, page.downloads)
        self.assertEqual(page.progress(), (5, 7))
        views = self.browser.find_elements(By.CLASS_NAME, "view")
        answer(0, lambda: ActionChains(self.browser, duration=0).double_click(views[0]).perform())
        self.assertEqual(page.progress(), (6, 7))  # a double click is one answer
        answer(0, lambda: page.click("left"))
        answer(1, lambda: page.keys(Keys.ARROW_RIGHT))
        self.assertTrue(page.element("done").is_displayed())
        page.click("return")
        page.keys(*[Keys.BACKSPACE] * 5)
        self.assertEqual(page.progress(), (2, 7))
        told[1].reverse()
        page.keys(Keys.ARROW_LEFT)
        page.click("finish")
        self.assertIn("1 pair without", page.element("summary").text)
        page.click("save")
        rows = page.saved("pairs-ash.csv")
        self.assertEqual(rows[0], ["grader", "better_batch", "better_well", "worse_batch",
                                   "worse_well"])
        self.assertEqual(rows[1:], [["ash", BATCH, better, BATCH, worse]
                                    for better, worse in filter(None, told)])

    def test_what_is_saved_makes_a_scale(self):
        # The sample plate's 15 coupons, judged as the panel's mean would.
        plates = PROJECT / "sample-images"
        self.results = self.folder / "plate"
        self.run_program("score", plates / "d1.jpg", "--photos", plates / "photos.csv",
                         "--out", self.results)
        grades = {}
        with open(plates / "panel.csv", newline="", encoding="utf-8") as file:
            for row in csv.DictReader(file):
                if row["batch"] == "b1":
                    grades.setdefault(row["well"], []).append(float(row["grade"]))
        panel = {well: sum(given) / len(given) for well, given in grades.items()}

        page = self.page("--repeats", "0", "--suggest", "8")
        page.begin("ash")
        for _ in range(8):
            half_steps = round(panel[page.shown()[0]] * 2)
            page.keys("0" if half_steps >= 20 else str(half_steps // 2))
            page.keys(*["."] * (half_steps % 2), Keys.ENTER)
        page.click("save")
        self.assertEqual(len(page.saved("grades-ash.csv")), 1 + 8)
        self.run_program("calibrate", "--results", self.results, "--grades",
                         page.downloads / "grades-ash.csv", "--out", self.results / "ash.json")

        page = self.page("--pairs", "--count", "20")
        page.begin("ash")
        for _ in range(20):
            left, right = page.shown()
            page.keys(Keys.ARROW_LEFT if panel[left] > panel[right] else Keys.ARROW_RIGHT)
        page.click("save")
        self.assertEqual(len(page.saved("pairs-ash.csv")), 1 + 20)
        self.run_program("calibrate", "--results", self.results, "--pairs",
                         page.downloads / "pairs-ash.csv", "--out", self.results / "pairs.json")

    def test_graders_take_turns_and_lose_nothing(self):
        page = self.page("--repeats", "0")
        page.begin('ash, "the elder"')
        page.keys("3", Keys.ENTER, "4")
        page.click("finish")
        page.click("other")
        page.begin("birch")
        self.assertEqual(page.progress()[0], 1)
        self.assertIsNone(page.chosen())
        page.keys("9")
        page.click("finish")
        page.click("other")
        page.begin('ash, "the elder"')
        self.assertEqual(page.chosen(), 4)
        page.click("finish")
        page.click("save")
        rows = page.saved("grades-ash-the-elder-.csv")
        self.assertEqual([row[0] for row in rows[1:]], ['ash, "the elder"'] * 2)
        self.assertEqual([row[3] for row in rows[1:]], ["3.0", "4.0"])


def save_small(png, file):
    """64 grays and colours do for a page on gray ground, at a third of the size."""
    picture = Image.open(io.BytesIO(png)).convert("RGB")
    picture.quantize(64, dither=Image.Dither.NONE).save(file, optimize=True)


def take_screenshots(results, pictures):
    folder = Path(tempfile.mkdtemp(prefix="laygauge-page-"))
    browser = start_browser(folder)
    browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", {
        "width": 1024, "height": 740, "deviceScaleFactor": 1, "mobile": False})
    try:
        for mode, name in (([], "grading"), (["--pairs"], "pairs")):
            file = results / f"{name}.html"
            # With this seed the ninth item, below, is of the plate with 15 runs.
            subprocess.run([PROGRAM, "grade", results, "--seed", "7", "--out", file, *mode],
                           check=True, stdout=subprocess.DEVNULL)
            page = Page(browser, file, folder)
            if name == "grading":
                save_small(browser.get_screenshot_as_png(), pictures / "grading-start.png")
            page.begin("ash")
            for _ in range(8):
                page.keys(Keys.ARROW_LEFT) if mode else page.keys("6", Keys.ENTER)
            if not mode:
                page.keys("5", ".")
            time.sleep(1)
            save_small(browser.get_screenshot_as_png(), pictures / f"{name}-page.png")
    finally:
        browser.quit()
        shutil.rmtree(folder, ignore_errors=True)


def main():
    global PROGRAM
    parser = argparse.ArgumentParser(description=__doc__,
                                     formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("program")
    parser.add_argument("--screenshots", type=Path, metavar="DIR")
    parser.add_argument("--results", type=Path, metavar="DIR", default=Path("results"))
    arguments, rest = parser.parse_known_args()
    PROGRAM = arguments.program
    if arguments.screenshots:
        take_screenshots(arguments.results.resolve(), arguments.screenshots)
    else:
        unittest.main(argv=[sys.argv[0], *rest])


if __name__ == "__main__":
    main()
