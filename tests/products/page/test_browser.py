"""The page in a headless browser, held against the NetCDF files it was made from."""

import numpy as np
import pytest
from scipy.stats import norm

from tests.products.page.folders import (
    HOSTILE,
    NETWORK,
    ODD,
    ODD_FROM,
    SILENT_HOUR,
    read_fields,
    read_stations,
)

DESKTOP, PHONE = (1400, 900), (390, 844)
LAYERS = [
    "PWV",
    "PWV above",
    "Change 1 h",
    "Change 3 h",
    "Change 6 h",
    "Uncertainty",
    "Probability",
]


class Watched:
    """A page opened in the browser, and all that it said and asked for."""

    def __init__(self, browser, path, size=DESKTOP, time=None):
        width, height = size
        self.context = browser.new_context(
            viewport={"width": width, "height": height}, timezone_id="Pacific/Auckland"
        )
        self.page = self.context.new_page()
        self.said, self.asked, self.dialogs = [], [], []
        self.page.on("console", lambda one: self.said.append((one.type, one.text)))
        self.page.on("pageerror", lambda one: self.said.append(("error", str(one))))
        self.page.on("request", lambda one: self.asked.append(one.url))
        self.page.on("dialog", lambda one: (self.dialogs.append(one.message), one.dismiss()))
        if time is not None:
            self.page.clock.set_fixed_time(time)
        self.url = path.as_uri()
        self.page.goto(self.url)
        self.page.wait_for_function("window.fieldgenPage.ready", timeout=60000)

    def run(self, code):
        return self.page.evaluate(code)

    def values(self):
        """Values of the layer on the map, NaN where there is none."""
        values = self.run("Array.from(state.models.image.data.image[0], v => isNaN(v) ? null : v)")
        return np.array(values, dtype=float)

    def source(self, name):
        """Columns of a source as arrays."""
        columns = self.run(
            f"Object.fromEntries(Object.entries(state.models.{name}.data).map(([name, column]) => "
            "[name, Array.from(column, v => Number.isNaN(v) ? null : v)]))"
        )
        return {
            name: np.array(column, dtype=object if name in ("text", "fill") else float)
            for name, column in columns.items()
        }

    def choose(self, layer):
        self.page.locator("#layers span", has_text=layer).first.click()

    def press(self, *keys):
        for key in keys:
            self.page.keyboard.press(key)

    def click_map(self, x, y):
        """Click at a place on the map [m]."""
        across, down = self.run(f"toPixels({x}, {y})")
        box = self.page.locator("#map").bounding_box()
        self.page.mouse.click(box["x"] + 1 + across, box["y"] + 1 + down)
        self.page.wait_for_timeout(400)  # Bokeh waits for a second tap

    def hour(self):
        return self.run("state.hour")

    def text(self, name):
        return self.page.locator(f"#{name}").inner_text()


@pytest.fixture
def opened(browser, page_file):
    """The page on a desktop."""
    watched = Watched(browser, page_file)
    yield watched
    watched.context.close()


@pytest.fixture(scope="module")
def fields(outputs):
    return read_fields(outputs)


@pytest.fixture(scope="module")
def stations(outputs):
    return read_stations(outputs)


def field_values(fields, name, hour):
    return fields[name].values[hour].ravel()


def test_page_says_no_error_and_asks_for_nothing(opened, fields):
    """Limit: the file itself is the only request, through all layers, hours and a click."""
    for layer in LAYERS:
        opened.choose(layer)
    opened.press("Home", "ArrowRight", "End")
    opened.click_map(0, 0)
    assert [one for one in opened.said if one[0] in ("error", "warning")] == []
    assert opened.asked == [opened.url]


def test_newest_hour_with_a_field_is_shown_first(opened, fields):
    """Round trip through file, packing and browser, to the last hundredth."""
    assert opened.hour() == fields.sizes["time"] - 1
    np.testing.assert_allclose(opened.values(), field_values(fields, "pwv", -1), atol=1e-5)


def test_slider_changes_the_picture(opened, fields):
    """Round trip, and the pixels themselves."""
    frame = opened.page.locator("#map")
    before = frame.screenshot()
    opened.page.locator("#time").fill("0")
    opened.page.wait_for_timeout(300)
    np.testing.assert_allclose(opened.values(), field_values(fields, "pwv", 0), atol=1e-5)
    assert frame.screenshot() != before
    assert "00:00–01:00 UTC" in opened.text("hour")
    assert "local 13:00–14:00" in opened.text("hour")


def test_keys_move_through_the_hours(opened):
    """Limit: neither end is passed."""
    opened.press("Home")
    assert opened.hour() == 0
    opened.press("ArrowLeft")
    assert opened.hour() == 0
    opened.press("ArrowRight", "ArrowRight")
    assert opened.hour() == 2
    opened.press("End", "ArrowRight")
    assert opened.hour() == opened.run("state.content.end.length") - 1


def test_arrow_keys_count_once_on_the_time_slider(opened):
    """Negative control: slider and page must not both take the key."""
    opened.page.locator("#time").focus()
    opened.press("Home", "ArrowRight")
    assert opened.hour() == 1


def test_play_runs_and_pauses(opened):
    """Limit."""
    opened.press("Home", " ")
    opened.page.wait_for_function("state.hour >= 2", timeout=10000)
    opened.press(" ")
    assert opened.text("play") == "Play"
    hour = opened.hour()
    opened.page.wait_for_timeout(1600)
    assert opened.hour() == hour


def test_an_hour_without_field_is_missing(opened):
    """Limit."""
    opened.run(f"setHour({SILENT_HOUR})")
    assert np.isnan(opened.values()).all()
    assert "too few stations" in opened.text("place-facts")
    assert opened.source("cells_far_from_stations")["left"].size == 0


@pytest.mark.parametrize("hours", [1, 3, 6])
def test_change_is_the_difference_of_two_hours(opened, fields, hours):
    """Second derivation, from the NetCDF file; an hour without a pair has no change."""
    opened.choose(f"Change {hours} h")
    later, earlier = (field_values(fields, "pwv", hour) for hour in (-1, -1 - hours))
    np.testing.assert_allclose(opened.values(), later - earlier, atol=1e-5)
    opened.press("Home")
    assert np.isnan(opened.values()).all()


def test_probability_is_the_normal_distributions(opened, fields):
    """Another library's answer: scipy's survival function, over the thresholds' whole range."""
    opened.choose("Probability")
    slider = opened.page.locator("#threshold")
    low, high = (int(slider.get_attribute(end)) for end in ("min", "max"))
    pwv, sigma = (field_values(fields, name, -1) for name in ("pwv", "pwv_sigma"))
    undecided = 0
    for threshold in range(low, high + 1):
        slider.fill(str(threshold))
        expected = 100 * norm.sf(threshold, pwv, sigma)
        np.testing.assert_allclose(opened.values(), expected, atol=2e-4)  # of single precision
        assert f"exceeds {threshold}" in opened.run("state.models.bar.title")
        undecided += ((expected > 20) & (expected < 80)).sum()
    assert undecided > 20


@pytest.mark.parametrize(
    "layer, name", [("PWV above", "pwv_at_reference"), ("Uncertainty", "pwv_sigma")]
)
def test_layers_are_the_fields_of_the_file(opened, fields, layer, name):
    """Round trip."""
    opened.choose(layer)
    np.testing.assert_allclose(opened.values(), field_values(fields, name, -1), atol=1e-5)


@pytest.mark.parametrize("layer", LAYERS)
def test_colours_mean_the_same_in_all_hours(opened, layer):
    """Limit: the ends of the colour bar stay."""
    opened.choose(layer)
    ends = "[state.models.mapper.low, state.models.mapper.high]"
    before = opened.run(ends)
    opened.press("Home")
    assert opened.run(ends) == before
    assert before[0] < before[1]


def test_click_gives_the_cells_series(opened, fields):
    """Round trip: line and band are the file's values and standard errors, hour by hour."""
    row, column = 3, 8
    x = (fields["x"].values[column] - fields["x"].values.mean()).item()
    y = (fields["y"].values[row] - fields["y"].values.mean()).item()
    opened.click_map(x + 900, y - 900)
    pwv, sigma = (fields[name].values[:, row, column] for name in ("pwv", "pwv_sigma"))
    line, band = opened.source("line"), opened.source("band")
    np.testing.assert_allclose(line["pwv"], pwv, atol=1e-5)
    known = np.isfinite(pwv)
    assert known.sum() == len(pwv) - 1
    np.testing.assert_allclose(band["low"], (pwv - sigma)[known], atol=1e-5)
    np.testing.assert_allclose(band["high"], (pwv + sigma)[known], atol=1e-5)
    stamps = fields["time"].values.astype("datetime64[ms]").astype(float)
    np.testing.assert_array_equal(band["end"], stamps[known])
    facts = opened.text("place-facts")
    assert f"{fields['terrain'].values[row, column]:.0f} m" in facts
    assert f"{pwv[-1]:.2f} ± {sigma[-1]:.2f}" in facts.replace("\xa0", " ")


def test_click_on_a_station_tells_used_from_rejected(opened, stations):
    """Round trip through the station file."""
    x, y = opened.run(f"[state.content.stations[{ODD}].x, state.content.stations[{ODD}].y]")
    opened.click_map(x, y)
    pwv, flag = stations["pwv"].values[ODD], stations["flag"].values[ODD]
    known = np.isfinite(pwv)
    used, rejected = opened.source("used")["pwv"], opened.source("rejected")["pwv"]
    np.testing.assert_allclose(used, pwv[known & (flag == 0)], atol=0.006)
    np.testing.assert_allclose(rejected, pwv[known & (flag != 0)], atol=0.006)
    assert len(rejected) >= len(pwv) - ODD_FROM
    assert f"ST{ODD:02d}" in opened.text("place-title")
    assert "not used: " in opened.text("place-facts")
    assert f"ST{ODD:02d}" in opened.text("unused")


def test_dots_and_crosses_are_the_flags_of_the_hour(opened, stations):
    """Round trip."""
    used = stations["flag"].values[:, -1] == 0
    assert opened.source("dots")["x"].size == used.sum() > 0
    assert opened.source("crosses")["x"].size == (~used).sum() > 0
    texts = opened.source("values")["text"]
    rounded = {f"{value:.0f}" for value in stations["pwv"].values[used, -1]}
    assert texts.size and set(texts) <= rounded


def test_flagged_cells_are_covered_by_patterns(opened, fields):
    """Second derivation: the area of the patterns is that of the flagged cells."""
    bits = dict(
        zip(fields["flag"].attrs["flag_meanings"].split(), fields["flag"].attrs["flag_masks"],
            strict=True)
    )  # fmt: skip
    total = 0
    for meaning in opened.run("state.content.cell_flags.map(flag => flag.meaning)"):
        boxes = opened.source(f"cells_{meaning}")
        area = ((boxes["right"] - boxes["left"]) * (boxes["top"] - boxes["bottom"])).sum()
        flagged = (fields["flag"].values[-1] & bits[meaning] != 0).sum()
        assert area == pytest.approx(flagged * 5000.0**2)
        total += flagged
    assert total > 0


def test_hostile_names_are_only_text(opened):
    """Negative control: shown letter by letter, run nowhere, also under the pointer."""
    x, y = opened.run("[state.content.stations[0].x, state.content.stations[0].y]")
    opened.click_map(x, y)
    assert opened.text("network") == NETWORK
    assert opened.page.title() == NETWORK
    shown = HOSTILE.replace("\x07", " ")
    assert shown in opened.text("place-title")
    assert shown in opened.text("pointer")
    assert opened.dialogs == []
    assert opened.page.locator("img").count() == 0
    assert opened.page.locator("main script, header script").count() == 0


@pytest.mark.parametrize("hours, old", [(2.9, False), (3.1, True)])
def test_old_data_are_a_warning(browser, page_file, fields, hours, old):
    """Limit: three hours by the browser's clock."""
    newest = fields["time"].values[-1].astype("datetime64[s]").astype(int)
    watched = Watched(browser, page_file, time=float(newest + 3600 * hours))
    classes = watched.page.locator("#age").get_attribute("class") or ""
    assert ("old" in classes.split()) == old
    assert watched.text("age").startswith("Old data") == old
    assert watched.text("age").endswith("ago")
    watched.context.close()


@pytest.mark.parametrize("size", [(320, 568), DESKTOP])
def test_nothing_runs_over_the_side(browser, page_file, size):
    """Limit: no horizontal scrolling, no element beyond the edge, a map in proportion."""
    watched = Watched(browser, page_file, size)
    watched.choose("Probability")
    assert watched.run("document.documentElement.scrollWidth") <= size[0]
    beyond = watched.run(
        "[...document.querySelectorAll('header *, main *, footer *')].filter(one => "
        "one.checkVisibility() && one.getBoundingClientRect().right > innerWidth + 0.5)"
        ".map(one => one.outerHTML.slice(0, 80))"
    )
    assert beyond == []
    touch = watched.run(
        "(function look(root) { return [...root.querySelectorAll('*')].flatMap(one => [...("
        "one.matches('.bk-events') ? [getComputedStyle(one).touchAction] : []), "
        "...(one.shadowRoot ? look(one.shadowRoot) : [])]); })(document)"
    )
    assert touch == ["pan-y pinch-zoom"] * 2  # a finger on a figure scrolls the page
    ratio = watched.run("state.models.map.inner_width / state.models.map.inner_height")
    assert ratio == pytest.approx(1.0, abs=0.01)
    watched.context.close()
