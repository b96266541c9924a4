"""Labels never overlap, never leave the frame, and their leaders stand at 45°; type is measured as it is set."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from PIL import Image

from knucklepath.plugins.overlays.glyphs import Label
from knucklepath.viewer.annotations import Annotator, Caption, Figure
from knucklepath.viewer.label_layout import MOST_LABELS, Box, Placed, Wish, place
from knucklepath.viewer.lettering import Lettering
from knucklepath.viewer.looks import Look, frame, look
from knucklepath.viewer.theme import LIGHT

FRAME = Box(20.0, 20.0, 940.0, 520.0)


@st.composite
def wishes(draw: st.DrawFn) -> list[Wish]:
    count = draw(st.integers(0, 14))
    spot = st.tuples(st.floats(-100.0, 1060.0), st.floats(-100.0, 640.0))
    size = st.tuples(st.floats(20.0, 320.0), st.floats(12.0, 48.0))
    return [Wish(f"label {k}", draw(spot), draw(size), draw(st.integers(0, 9))) for k in range(count)]


@st.composite
def boxes(draw: st.DrawFn) -> list[Box]:
    found = []
    for _ in range(draw(st.integers(0, 4))):
        left, top = draw(st.floats(0.0, 800.0)), draw(st.floats(0.0, 450.0))
        found.append(Box(left, top, left + draw(st.floats(1.0, 300.0)), top + draw(st.floats(1.0, 120.0))))
    return found


def check(placed: tuple[Placed, ...], obstacles: list[Box]) -> None:
    assert len(placed) <= MOST_LABELS
    for number, item in enumerate(placed):
        assert FRAME.holds(item.box)
        assert FRAME.has(item.anchor)
        assert not item.box.has(item.anchor)
        across, down = item.elbow[0] - item.anchor[0], item.elbow[1] - item.anchor[1]
        assert abs(across) == pytest.approx(abs(down))
        assert abs(across) > 1.0
        assert item.elbow[0] == pytest.approx(item.box.left if across > 0 else item.box.right)
        assert item.box.top < item.elbow[1] < item.box.bottom
        assert not any(item.box.overlaps(box) for box in obstacles)
        for other in placed[number + 1 :]:
            assert not item.box.overlaps(other.box)
            assert not item.box.cut_by(other.anchor, other.elbow)
            assert not other.box.cut_by(item.anchor, item.elbow)


@given(wishes(), boxes())
@settings(deadline=None, max_examples=150)
def test_labels_stay_apart_and_inside_whatever_is_asked(wanted: list[Wish], obstacles: list[Box]) -> None:
    placed = place(wanted, FRAME, obstacles)
    check(placed, obstacles)
    assert placed == place(wanted, FRAME, obstacles), "the same wishes give the same places"


@given(wishes(), st.floats(-6.0, 6.0), st.floats(-6.0, 6.0))
@settings(deadline=None, max_examples=60)
def test_labels_keep_apart_while_they_move_on(wanted: list[Wish], dx: float, dy: float) -> None:
    before = place(wanted, FRAME)
    moved = [Wish(wish.key, (wish.anchor[0] + dx, wish.anchor[1] + dy), wish.size, wish.priority) for wish in wanted]
    check(place(moved, FRAME, previous={item.key: item for item in before}), [])


def test_a_label_keeps_its_side_while_it_can() -> None:
    first = [Wish("a", (480.0, 270.0), (100.0, 24.0), 1)]
    kept = place(first, FRAME, [Box(490.0, 200.0, 700.0, 262.0)])
    assert kept[0].choice[:2] != (1, -1)
    after = place(first, FRAME, previous={"a": kept[0]})
    assert after[0].choice == kept[0].choice
    assert place(first, FRAME)[0].choice[:2] == (1, -1)


def test_the_most_important_labels_win_when_there_are_too_many() -> None:
    wanted = [Wish(str(k), (60.0 + 70.0 * k, 260.0), (40.0, 20.0), 10 - k) for k in range(10)]
    kept = {item.key for item in place(wanted, FRAME)}
    assert kept == {"4", "5", "6", "7", "8", "9"}


def test_labels_make_way_for_what_should_be_seen() -> None:
    busy_right = place(
        [Wish("a", (480.0, 270.0), (100.0, 24.0), 1)], FRAME, busy=lambda box: 1.0 if box.left > 400.0 else 0.0
    )
    assert busy_right[0].box.right < 480.0


def test_a_label_that_nothing_fits_is_left_out() -> None:
    assert place([Wish("a", (480.0, 270.0), (100.0, 24.0), 1)], FRAME, [FRAME]) == ()
    assert place([Wish("a", (5.0, 5.0), (100.0, 24.0), 1)], FRAME) == ()


@pytest.mark.parametrize("lettering", [Lettering(1.0), Lettering(2.0), Lettering(2.0, (), ())], ids=str)
def test_figures_are_tabular_and_text_is_shortened_to_fit(lettering: Lettering) -> None:
    widths = {lettering.width(digit, 28) for digit in "0123456789"}
    assert len(widths) == 1
    text = "wheel-centre path, −50 to +60\N{THIN SPACE}mm"
    room = 0.5 * lettering.width(text, 13)
    short = lettering.shorten(text, 13, room)
    assert lettering.width(short, 13) <= room
    assert short.endswith("…")
    assert lettering.shorten(text, 13, 1e6) == text
    lines = lettering.wrap("proves neither strength nor roadworthiness", 11, lettering.width("neither strength", 11))
    assert len(lines) > 1
    assert " ".join(lines) == "proves neither strength nor roadworthiness"


def test_a_machine_without_fonts_still_writes_signs_that_can_be_read() -> None:
    bare = Lettering(1.0, (), ())
    assert bare.readable("−1.5° · 20\N{THIN SPACE}mm", 13) == "-1.5° · 20 mm"
    assert bare.readable("Žluťák", 13) == "Zlutak"


def label_scene(
    labels: dict[str, Label], size: tuple[int, int] = (960, 540), chosen: Look | None = None
) -> tuple[Annotator, np.ndarray]:  # type: ignore[type-arg]
    points = np.random.default_rng(3).uniform([-200, 300, 0], [200, 700, 500], (40, 3))
    camera = frame(points, chosen or look("front"), size[0] / size[1])
    annotator = Annotator(size, camera, LIGHT, np.array([0.0, 650.0, 250.0]))
    blank = Image.new("RGB", (2 * size[0], 2 * size[1]), LIGHT.colour("background"))
    figures = (Figure("Camber", "−1.50°", "", "−88.88°"), Figure("Toe", "+0.20°", "", "−88.88°"))
    caption = Caption("A title", "travel 0.0 mm", "file.toml, 2026-01-02", figures, "A caution.")
    return annotator, np.asarray(annotator.finish(blank, caption, labels))


def test_a_finished_picture_carries_words_labels_and_a_scale_bar_that_holds() -> None:
    labels = {
        "in": Label(np.array([0.0, 500.0, 200.0]), "in the picture", "force-line"),
        "line": Label(
            np.array([0.0, 1e5, 200.0]),
            "on its line",
            "instant-axis",
            along=np.array([[0.0, 9e4, 200.0], [0.0, 600.0, 300.0]]),
        ),
        "out": Label(np.array([0.0, 1e5, 200.0]), "out of the picture", "ink"),
    }
    annotator, picture = label_scene(labels)
    assert picture.shape == (540, 960, 3)
    assert set(annotator.placed) == {"in", "line"}
    for key, at in (("in", [0.0, 500.0, 200.0]), ("line", [0.0, 600.0, 300.0])):
        spot = annotator.camera.project(np.array(at), 960.0, 540.0)[:2]
        assert np.allclose(annotator.placed[key].anchor, spot)
    ink = np.array([27, 30, 33])
    dark = (np.abs(picture.astype(int) - ink).max(axis=2) < 40).any(axis=1)
    assert dark[:60].any(), "the title stands at the top"
    rows = np.abs(picture[400:, 600:].astype(int) - ink).max(axis=2) < 40
    longest = max(_longest_run(row) for row in rows)
    per_mm = annotator.camera.px_per_mm(annotator.scale_at, 540.0)
    assert longest / per_mm == pytest.approx(round(longest / per_mm, -1), abs=2.0 / per_mm)


def _longest_run(row: np.ndarray) -> int:  # type: ignore[type-arg]
    edges = np.flatnonzero(np.diff(np.concatenate(([0], row.astype(int), [0]))))
    return int((edges[1::2] - edges[::2]).max()) if len(edges) else 0


@pytest.mark.parametrize("size", [(160, 120), (480, 360), (360, 640), (1920, 1080)])
def test_any_size_of_picture_can_be_written_on(size: tuple[int, int]) -> None:
    _, picture = label_scene(
        {"a": Label(np.array([0.0, 500.0, 200.0]), "a long label for a small picture", "ink")}, size
    )
    assert picture.shape == (size[1], size[0], 3)
