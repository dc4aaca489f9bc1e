"""The listening page in a real browser, from a file: it plays, draws, and keeps to itself."""

import time

import numpy as np
import pytest
import soundfile
from selenium.webdriver.common.action_chains import ActionChains
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys

STATES = """return [...document.querySelectorAll('audio')].map(
    a => ({playing: !a.paused && !a.ended, at: a.currentTime, volume: a.volume}))"""
DURATIONS = "return [...document.querySelectorAll('audio')].map(a => a.duration)"


def wait_for(condition, seconds=10):
    deadline = time.monotonic() + seconds
    while not (found := condition()):
        assert time.monotonic() < deadline, "it did not come about"
        time.sleep(0.03)
    return found


def playing(page):
    """Numbers of the sounds that play, from 1."""
    return [n for n, state in enumerate(page.run(STATES), start=1) if state["playing"]]


def wait_playing(page, *numbers):
    wait_for(lambda: playing(page) == list(numbers))


def place(page, number):
    return page.run(STATES)[number - 1]["at"]


def press(page, *keys):
    ActionChains(page.driver).send_keys(*keys).perform()


def ready(page):
    """Wait until every player knows how long its sound is."""
    return wait_for(lambda: all(d is not None for d in page.run(DURATIONS)) and page.run(DURATIONS))


def points(page, number, line):
    script = """return [...document.querySelectorAll(`#sound-${arguments[0]} .${arguments[1]}`)]
        .flatMap(p => [...p.points]).map(p => [p.x, p.y])"""
    return np.array(page.run(script, number, line))


def mark(page, number):
    """Where the place is drawn: None if it is not, else x and y in the drawing's units."""
    script = """const g = document.querySelector(`#sound-${arguments[0]} g.place`);
        if (g.getAttribute('display') === 'none') return null;
        const d = g.querySelector('.place-mark');
        return [g.transform.baseVal[0].matrix.e, d.transform.baseVal[0].matrix.f]"""
    return page.run(script, number)


# --- what is there ----------------------------------------------------------------------------


def test_every_player_knows_its_length(page, made):
    durations = ready(page)
    files = sorted(made.glob("*.flac"))
    assert len(durations) == len(files) == 4
    for file, duration in zip(files, durations, strict=True):
        assert duration == pytest.approx(soundfile.info(file).duration, abs=0.05)
    assert {state["volume"] for state in page.run(STATES)} == {0.3}


def test_every_curve_is_drawn(page):
    boxes = page.run(
        "return [...document.querySelectorAll('svg.curve polyline')].map(p => {"
        "const b = p.getBoundingClientRect(); return [b.width, b.height, p.points.length]})"
    )
    assert len(boxes) == 8
    for width, height, count in boxes:
        assert width > 300
        assert height > 100
        assert count > 33  # the tune has 33 notes
    key, glide = points(page, 2, "key-line"), points(page, 2, "glide-line")
    assert key[0, 0] == glide[0, 0]
    assert key[-1, 0] == pytest.approx(glide[-1, 0], abs=0.1)
    # A glide follows its key from below or above, and at the end stands where it was sent.
    assert glide[-1, 1] == pytest.approx(key[-1, 1], abs=2.0)
    assert np.ptp(glide[:, 1]) < np.ptp(key[:, 1]) + 1.0


def test_a_screen_reader_hears_what_each_thing_is(page):
    article = page.driver.find_element(By.ID, "sound-3")
    assert article.accessible_name == "Sound 3: slow, rotation 0.1"
    curve = article.find_element(By.CSS_SELECTOR, "svg.curve")
    assert curve.aria_role in ("img", "image")
    assert curve.accessible_name.startswith("Pitch curve of sound 3 33 steps of the key volts")
    names = [a.accessible_name for a in page.driver.find_elements(By.TAG_NAME, "audio")]
    assert names == [f"Player of sound {n}" for n in range(1, 5)]
    for field in page.driver.find_elements(By.CSS_SELECTOR, "input, textarea, button, summary"):
        assert field.accessible_name
    assert not page.driver.find_element(By.CLASS_NAME, "unscripted").is_displayed()
    levels = [int(h.tag_name[1]) for h in page.driver.find_elements(By.CSS_SELECTOR, "h1,h2,h3")]
    assert levels == [1] + [2] * 9


# --- playing ----------------------------------------------------------------------------------


def test_keys_play_and_stop_and_only_one_sounds(page):
    ready(page)
    press(page, " ")
    wait_playing(page, 1)
    wait_for(lambda: place(page, 1) > 0.3)
    now = page.driver.find_element(By.ID, "now")
    assert now.text == "Sound 1: fast, rotation 0.1 plays."
    press(page, "3")
    wait_playing(page, 3)
    assert place(page, 3) >= 0.3  # the same place in the tune, to compare
    assert page.run("return document.activeElement.id") == "sound-3"
    press(page, "n")
    wait_playing(page, 4)
    press(page, "b")
    wait_playing(page, 3)
    press(page, "n", "n")
    wait_playing(page, 1)
    press(page, "p")
    wait_playing(page, 4)
    press(page, "b")
    wait_playing(page, 1)
    press(page, " ")
    wait_playing(page)
    wait_for(lambda: now.text == "Nothing plays.")
    stopped = place(page, 1)
    assert stopped > 0.3
    press(page, "2")
    wait_playing(page, 2)
    press(page, "2")
    wait_playing(page)
    press(page, "0")
    wait_for(lambda: place(page, 2) == 0.0)
    press(page, "4", Keys.ESCAPE)
    wait_playing(page)


def test_keys_in_a_burst_leave_the_last_sound_alone(page):
    ready(page)
    press(page, "1", "2", "3", "4", "p", "p")
    wait_playing(page, 2)
    begun = place(page, 2)
    wait_for(lambda: place(page, 2) > begun + 0.2)
    assert playing(page) == [2]


def test_moving_on_starts_at_the_beginning_if_asked(page):
    ready(page)
    page.click("#keep-place")
    press(page, "1")
    wait_for(lambda: place(page, 1) > 0.5)
    press(page, "n")
    wait_playing(page, 2)
    assert place(page, 2) < 0.4


def test_players_keep_their_own_keys_and_texts_theirs(page):
    ready(page)
    remark = page.driver.find_element(By.ID, "remark-2")
    remark.send_keys("2 no, 1 is better")
    assert remark.get_attribute("value") == "2 no, 1 is better"
    assert playing(page) == []
    page.run("document.querySelectorAll('audio')[1].focus()")
    press(page, " ")
    wait_playing(page, 2)
    wait_for(lambda: place(page, 2) > 0.1)
    press(page, " ")
    wait_playing(page)
    copy = page.driver.find_element(By.ID, "copy")
    copy.send_keys(" ")
    wait_for(lambda: page.driver.find_element(By.ID, "copied").text)
    assert playing(page) == []


def test_keys_can_be_taken_out_but_not_silence(page):
    ready(page)
    page.click("#use-keys")
    page.run("document.activeElement.blur()")
    press(page, "1", "n")
    assert playing(page) == []
    page.run("document.querySelectorAll('audio')[2].focus()")
    press(page, " ")
    wait_playing(page, 3)
    press(page, Keys.ESCAPE)
    wait_playing(page)


def test_a_second_player_silences_the_first_and_shares_its_volume(page):
    ready(page)
    page.run("const a = document.querySelectorAll('audio'); a[0].volume = 0.6; a[0].focus()")
    press(page, " ")
    wait_playing(page, 1)
    page.run("document.querySelectorAll('audio')[3].focus()")
    press(page, " ")
    wait_playing(page, 4)
    wait_for(lambda: {state["volume"] for state in page.run(STATES)} == {0.6})


@pytest.mark.parametrize("motion", ["no-preference", "reduce"])
def test_the_place_is_marked_on_the_curve(page, made, motion):
    page.show(made / "index.html", prefers_reduced_motion=motion)
    duration = ready(page)[1]
    assert mark(page, 2) is None
    glide = points(page, 2, "glide-line")

    def expected(at):
        x = glide[0, 0] + (glide[-1, 0] - glide[0, 0]) * at / duration
        return x, float(np.interp(x, *glide.T))

    page.run("document.querySelectorAll('audio')[1].currentTime = 2.0")
    wait_for(lambda: mark(page, 2))
    assert mark(page, 2) == pytest.approx(expected(2.0), abs=0.1)
    press(page, "2")
    wait_for(lambda: place(page, 2) > 2.8)
    press(page, " ")
    wait_playing(page)
    wait_for(lambda: mark(page, 2) == pytest.approx(expected(place(page, 2)), abs=0.1))
    assert mark(page, 1) is None


def test_a_click_on_the_curve_goes_there(page):
    duration = ready(page)[0]
    curve = page.driver.find_element(By.CSS_SELECTOR, "#sound-1 .curve")
    page.run("arguments[0].scrollIntoView({block: 'center'})", curve)
    ActionChains(page.driver).move_to_element(curve).click().perform()
    middle = (240 - 44) / (434 - 44)  # of the field, from the middle of the drawing
    wait_for(lambda: place(page, 1) == pytest.approx(middle * duration, abs=0.1))


# --- choosing ---------------------------------------------------------------------------------


def test_the_choice_is_text_to_copy(page):
    page.click("input[value='2']")
    page.driver.find_element(By.ID, "remark-1").send_keys("too quick for the <wolf>")
    note = page.driver.find_element(By.ID, "note")
    lines = note.get_attribute("value").splitlines()
    assert lines[:2] == ["Listening page: Two ranges, film capacitors", "Tune: run"]
    assert lines[2].startswith("My choice: sound 2: fast, rotation 0.6; time constant 93.4")
    assert lines[2].endswith("02-fast-0.600.flac")
    assert lines[3:] == ["On sound 1: too quick for the <wolf>"]
    page.click("#copy")
    said = wait_for(lambda: page.driver.find_element(By.ID, "copied").text)
    assert "op" in said
    chosen = page.run("const n = document.getElementById('note'); return n.selectionEnd")
    assert chosen == len("\n".join(lines))


# --- every screen -----------------------------------------------------------------------------


@pytest.mark.parametrize(("width", "height"), [(320, 640), (390, 844), (820, 1180), (1200, 800)])
def test_nothing_sticks_out_sideways(page, made, width, height):
    page.show(made / "index.html", width=width, height=height)
    page.run("document.querySelectorAll('details').forEach(d => d.open = true)")
    texts = "document.querySelectorAll('h1, h2, dd, .piece').forEach(e => e.textContent = '%s')"
    for script in ("", texts % ("long" * 40), texts % ("long " * 40)):
        page.run(script)
        assert page.run("return document.documentElement.scrollWidth") <= width
        widest = page.run(
            "return Math.max(...[...document.querySelectorAll('body > *, article *:not(td, th)')]"
            ".filter(e => !e.closest('.wide, .unseen')).map(e => e.getBoundingClientRect().right))"
        )
        assert widest <= width
    least = page.run(
        "return Math.min(...[...document.querySelectorAll('.curve text')]"
        ".map(t => t.getBoundingClientRect().height))"
    )
    assert least >= 10


def luminance(colour):
    """Relative luminance of ``rgb(r, g, b)`` (WCAG 2.2, from memory)."""
    parts = np.array([float(p) for p in colour[4:-1].split(",")]) / 255.0
    linear = np.where(parts <= 0.04045, parts / 12.92, ((parts + 0.055) / 1.055) ** 2.4)
    return float(linear @ (0.2126, 0.7152, 0.0722))


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_scheme_is_heeded_and_its_contrast_suffices(page, made, scheme):
    page.show(made / "index.html", prefers_color_scheme=scheme)
    style = (
        "const s = getComputedStyle(document.querySelector(arguments[0])); return s[arguments[1]]"
    )
    paper = luminance(page.run(style, "body", "backgroundColor"))
    assert (paper > 0.5) == (scheme == "light")
    for where, what, least in (
        ("body", "color", 7.0), (".small", "color", 4.5), (".curve text", "fill", 4.5),
        ("a", "color", 4.5), (".playing", "color", 4.5),
        (".key-line", "stroke", 3.0), (".glide-line", "stroke", 3.0),
        (".place-line", "stroke", 3.0),
    ):  # fmt: skip
        light = luminance(page.run(style, where, what))
        ratio = (max(light, paper) + 0.05) / (min(light, paper) + 0.05)
        assert ratio >= least, (where, ratio)


def test_without_scripts_the_players_play(page, made):
    page.show(made / "index.html", scripts=False)
    durations = ready(page)
    assert len(durations) == 4
    assert not any(e.is_displayed() for e in page.driver.find_elements(By.CLASS_NAME, "scripted"))
    assert page.driver.find_element(By.CLASS_NAME, "unscripted").is_displayed()
    page.run("document.querySelectorAll('audio')[1].focus()")
    press(page, " ")
    wait_playing(page, 2)
    press(page, " ")
    wait_playing(page)


def test_only_the_page_and_its_sounds_are_asked_for(page, made):
    ready(page)
    press(page, "1")
    wait_for(lambda: place(page, 1) > 0.2)
    press(page, Keys.ESCAPE)
    entries = page.run("return performance.getEntriesByType('resource').map(e => e.name)")
    ours = {path.as_uri() for path in made.iterdir()}
    assert set(entries) <= ours
    asked = set(page.requests())
    assert {url for url in asked if not url.startswith("data:")} == ours


def test_a_script_that_got_in_would_not_run(page):
    page.run(
        "window.got = 0; const s = document.createElement('script');"
        "s.textContent = 'window.got = 1'; document.body.append(s)"
    )
    assert page.run("return window.got") == 0
    refused = page.console()
    assert len(refused) == 1
    assert "Content Security Policy" in refused[0]["message"]
