"""The lens: its model against OpenCV's, its inverse, its file, and its calibration from pictures of known truth."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest

from layout.errors import CallError
from layout.image.card import draw_card
from layout.image.chessboard import PatternView, calibrate, find_chessboard, fit_lens
from layout.lens import Lens, distort, fold_radius, read_lens, undistort, write_lens
from tests.pictures.card import Floats, Pinhole, Print, facing, photograph, printed_board, printed_card

SIZE = (640, 480)
TRUE_FOCAL, TRUE_CENTRE = 700.0, (324.0, 236.0)
TRUE_DISTORTION = (-0.18, 0.06, 0.0008, -0.0005, 0.0)
TILTS = ((25, 0, 0), (-25, 5, 10), (0, 28, -5), (5, -28, 3), (18, 18, 90), (-15, 20, 40), (0, 0, 0))
COLUMNS, ROWS, SQUARE = 8, 6, 20.0


def a_lens(*distortion: float, size: tuple[int, int] = SIZE, focal: float = 700.0) -> Lens:
    """Return a lens whose five numbers of distortion begin as given."""
    five: Any = (*distortion, *(0.0 for _ in range(5 - len(distortion))))
    return Lens(
        schema=1,
        size=size,
        focal_px=(focal, 1.01 * focal),
        focal_sd_px=(1.0, 1.0),
        centre_px=(size[0] / 2 + 3.3, size[1] / 2 - 4.1),
        centre_sd_px=(1.0, 1.5),
        distortion=five,
        distortion_sd=(0.0, 0.0, 0.0, 0.0, 0.0),
        rms_px=0.2,
    )


LENSES = {
    "none": a_lens(),
    "barrel": a_lens(-0.27, 0.05),
    "pincushion": a_lens(0.15, 0.3, 0.0, 0.0, -0.1),
    "all five": a_lens(-0.266, -0.0386, 0.0018, -0.0003, 0.238),
    "decentred": a_lens(-0.1, 0.0, 0.01, -0.012, 0.0),
    "large picture": a_lens(-0.2, 0.08, 0.001, 0.001, 0.0, size=(11648, 8736), focal=13000.0),
}


def grid_over(lens: Lens) -> Floats:
    """Return points all over the picture, rim included, shape (15, 21, 2)."""
    y, x = np.mgrid[-0.5 : lens.size[1] - 0.5 : 15j, -0.5 : lens.size[0] - 0.5 : 21j]
    return np.stack([x, y], axis=-1)


def board_pinhole(tilt: tuple[float, float, float], at: tuple[float, float] = (0.0, 0.0)) -> Pinhole:
    """Return the true camera before a board whose middle it sees, ``at`` mm beside the picture's middle."""
    there = facing(SIZE, (COLUMNS * SQUARE / 2 - SQUARE, ROWS * SQUARE / 2 - SQUARE), 2.2, tilts_deg=tilt)
    shift = there.shift * TRUE_FOCAL / there.focal_px + [*at, 0.0]
    return Pinhole(TRUE_FOCAL, TRUE_CENTRE, there.turn, shift, TRUE_DISTORTION)


def corner_grid() -> Floats:
    """Return the inner corners of the board, mm, row by row."""
    x, y = np.meshgrid(np.arange(COLUMNS - 1.0), np.arange(ROWS - 1.0))
    return np.asarray(np.column_stack([x.ravel(), y.ravel()]) * SQUARE, np.float64)


def noisy_views(seed: int, sd_px: float) -> list[PatternView]:
    """Return the corners that the true camera shows of the board at all tilts, with noise."""
    rng = np.random.default_rng(seed)
    views = []
    for index, tilt in enumerate(TILTS):
        at = board_pinhole(tilt, (15.0 * (index % 3 - 1), 10.0 * (index % 2))).see(corner_grid())
        views.append(PatternView(f"{index}.png", corner_grid(), at + rng.normal(0, sd_px, at.shape)))
    return views


def save(path: Path, pixels: Any) -> Path:  # noqa: ANN401 - a picture
    """Write a picture."""
    assert cv2.imwrite(str(path), pixels)
    return path


def load(path: Path) -> Any:  # noqa: ANN401 - a picture
    """Read a picture."""
    return cv2.imread(str(path))


@pytest.fixture(scope="module")
def board_pictures(tmp_path_factory: pytest.TempPathFactory) -> list[Path]:
    """Return rendered photographs of the board, one at each tilt."""
    folder = tmp_path_factory.mktemp("boards")
    board = printed_board(COLUMNS, ROWS, SQUARE)
    how = Print(blur_px=0.7, slope=0.3, noise=0.01)
    # a rim of one square, and the first inner corner one square further in
    origin = (-2 * SQUARE, -2 * SQUARE)
    return [
        save(folder / f"{index}.png", photograph(board, origin, board_pinhole(tilt), SIZE, how, index))
        for index, tilt in enumerate(TILTS)
    ]


@pytest.mark.parametrize("name", LENSES)
def test_undistort_is_the_inverse_of_distort(name: str) -> None:
    lens = LENSES[name]
    seen = grid_over(lens)
    assert np.abs(distort(lens, undistort(lens, seen)) - seen).max() < 1e-9
    # and the other way: of the points that could be seen there, the one on the side of the centre
    ideal = undistort(lens, seen)
    assert np.abs(undistort(lens, distort(lens, ideal)) - ideal).max() < 1e-9


@pytest.mark.parametrize("name", LENSES)
def test_the_model_is_that_of_opencv(name: str) -> None:
    lens = LENSES[name]
    ideal = undistort(lens, grid_over(lens)).reshape(-1, 2)
    rays = np.column_stack([(ideal - lens.centre_px) / lens.focal_px, np.ones(len(ideal))])
    inner = np.array(
        [[lens.focal_px[0], 0, lens.centre_px[0]], [0, lens.focal_px[1], lens.centre_px[1]], [0, 0, 1]]
    )
    theirs, _ = cv2.projectPoints(rays, np.zeros(3), np.zeros(3), inner, np.array(lens.distortion))
    np.testing.assert_allclose(distort(lens, ideal), theirs.reshape(-1, 2), rtol=0, atol=1e-8)


def test_a_lens_without_distortion_moves_no_point() -> None:
    lens = LENSES["none"]
    np.testing.assert_allclose(undistort(lens, grid_over(lens)), grid_over(lens), rtol=0, atol=1e-11)


def test_any_shape_of_points_is_kept() -> None:
    lens = LENSES["barrel"]
    assert undistort(lens, np.array([100.0, 90.0])).shape == (2,)
    assert undistort(lens, np.zeros((0, 2))).shape == (0, 2)


def test_points_where_the_model_folds_back_are_refused() -> None:
    lens = a_lens(-1.2)
    # r (1 - 1.2 r^2) is greatest at 1 / sqrt(3.6), where it is two thirds of that
    assert fold_radius(lens) == pytest.approx(1 / np.sqrt(3.6), rel=1e-12)
    furthest = 700.0 * 2 / 3 / np.sqrt(3.6)
    inside = np.add(lens.centre_px, (0.999 * furthest, 0.0))
    assert np.abs(distort(lens, undistort(lens, inside)) - inside).max() < 1e-9
    with pytest.raises(CallError, match="folds back there; calibrate again with the board near the corners"):
        undistort(lens, np.add(lens.centre_px, (1.001 * furthest, 0.0)))


def test_points_that_are_not_finite_are_refused() -> None:
    with pytest.raises(CallError, match="needs points with finite coordinates"):
        undistort(LENSES["barrel"], np.array([[np.nan, 1.0]]))


def test_a_lens_serves_the_same_picture_made_smaller() -> None:
    lens = LENSES["all five"]
    half = lens.for_size((320, 240))
    points = np.array([[10.0, 20.0], [600.0, 400.0]])
    # the picture begins at -0.5, half a pixel left of the first one's centre
    smaller = undistort(half, (points + 0.5) / 2 - 0.5)
    np.testing.assert_allclose((smaller + 0.5) * 2 - 0.5, undistort(lens, points), rtol=0, atol=1e-9)
    assert half.rms_px == pytest.approx(lens.rms_px / 2)
    assert lens.for_size(lens.size) is lens
    # rounding to whole pixels is no cropping
    assert lens.for_size((427, 320)).size == (427, 320)


@pytest.mark.parametrize(
    ("size", "why"), [((480, 640), "held the other way"), ((640, 400), "cropped"), ((630, 480), "cropped")]
)
def test_a_lens_does_not_serve_another_picture(size: tuple[int, int], why: str) -> None:
    with pytest.raises(CallError, match=rf"640 x 480 pixels.*has {size[0]} x {size[1]}: .*{why}"):
        LENSES["barrel"].for_size(size)


def test_a_lens_file_is_read_as_it_was_written(tmp_path: Path) -> None:
    lens = LENSES["all five"]
    write_lens(lens, tmp_path / "a.lens.json")
    again = read_lens(tmp_path / "a.lens.json")
    assert again == lens
    assert again.to_json() == lens.to_json() == (tmp_path / "a.lens.json").read_text(encoding="utf-8")
    assert '  "size": [640, 480],\n' in lens.to_json()
    with pytest.raises(CallError, match=r"cannot be written: there is no such file or folder"):
        write_lens(lens, tmp_path / "nowhere" / "a.lens.json")


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"focal_px": [0.0, 700.0]}, r"focal_px\.0: should be greater than or equal"),
        ({"focal_px": [700.0]}, r"focal_px\.1: is missing"),
        ({"distortion": [0, 0, 0, 0, "0"]}, r"distortion\.4: should be a valid number"),
        ({"size": None}, r"size: should be a valid tuple"),
        ({"zoom": 2}, "zoom: unknown key"),
        ({"schema": 2}, "schema: should be 1, has '2'"),
        ({"rms_px": float("nan")}, "rms_px: should be"),
    ],
)
def test_a_malformed_lens_file_is_refused(tmp_path: Path, change: dict[str, object], message: str) -> None:
    path = tmp_path / "b.lens.json"
    path.write_text(json.dumps(json.loads(LENSES["barrel"].to_json()) | change), encoding="utf-8")
    with pytest.raises(CallError, match=message) as caught:
        read_lens(path)
    assert str(path) in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("text", ["", "{", "[]", '{"schema": 1, "schema": 1}', "[" * 100_000])
def test_what_is_no_lens_file_is_refused(tmp_path: Path, text: str) -> None:
    path = tmp_path / "c.lens.json"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(CallError) as caught:
        read_lens(path)
    assert str(caught.value).startswith(f"{path}: ")


def test_a_lens_file_that_is_not_there_is_refused(tmp_path: Path) -> None:
    with pytest.raises(CallError, match="cannot be read: there is no such file"):
        read_lens(tmp_path / "none.lens.json")
    with pytest.raises(CallError, match="is no file but a folder"):
        read_lens(tmp_path)


def test_a_fit_to_noisy_corners_knows_how_good_it_is() -> None:
    z = []
    for seed in range(40):
        lens = fit_lens(noisy_views(seed, 0.15), SIZE)
        z.append(
            [
                (lens.focal_px[0] - TRUE_FOCAL) / lens.focal_sd_px[0],
                *(np.subtract(lens.centre_px, TRUE_CENTRE) / lens.centre_sd_px),
                # the last one, which is zero, is mostly not fitted at all
                *(np.subtract(lens.distortion, TRUE_DISTORTION) / np.maximum(lens.distortion_sd, 1e-9))[:4],
            ]
        )
        # both coordinates have this noise
        assert lens.rms_px == pytest.approx(0.15 * np.sqrt(2), rel=0.15)
    spread = np.sqrt(np.mean(np.square(z), axis=0))
    # of 40 standard normal numbers the root mean square is 1, with a sd of 0.11: three of those
    assert ((spread > 0.66) & (spread < 1.34)).all(), spread


def test_a_fit_without_noise_gives_the_true_lens() -> None:
    lens = fit_lens(noisy_views(0, 0.0), SIZE)
    # OpenCV is handed the points in single precision, 3e-5 px
    assert lens.focal_px[0] == lens.focal_px[1] == pytest.approx(TRUE_FOCAL, abs=0.01)
    np.testing.assert_allclose(lens.centre_px, TRUE_CENTRE, atol=0.01)
    seen = grid_over(lens)
    true = lens.model_copy(
        update={"focal_px": (TRUE_FOCAL,) * 2, "centre_px": TRUE_CENTRE, "distortion": TRUE_DISTORTION}
    )
    np.testing.assert_allclose(undistort(lens, seen), undistort(true, seen), rtol=0, atol=0.05)
    assert lens.rms_px < 0.001


def test_pictures_of_a_chessboard_give_the_lens(board_pictures: list[Path]) -> None:
    found = calibrate(board_pictures)
    lens = found.lens
    assert found.unused == ()
    assert [picture.file for picture in lens.pictures] == [path.name for path in board_pictures]
    assert {picture.points for picture in lens.pictures} == {(COLUMNS - 1) * (ROWS - 1)}
    assert lens.rms_px < 0.15
    assert abs(lens.focal_px[0] - TRUE_FOCAL) < 3 * lens.focal_sd_px[0]
    assert lens.focal_sd_px[0] < 0.01 * TRUE_FOCAL
    # the board reaches over the middle half of the picture: there its points are freed of the distortion
    seen = np.array([[x, y] for x in (200.0, 324.0, 450.0) for y in (140.0, 236.0, 330.0)])
    shape = undistort(lens, seen) / lens.focal_px[0]
    true = lens.model_copy(
        update={"focal_px": (TRUE_FOCAL,) * 2, "centre_px": TRUE_CENTRE, "distortion": TRUE_DISTORTION}
    )
    wanted = undistort(true, seen) / TRUE_FOCAL
    apart = np.linalg.norm(shape[:, None] - shape, axis=-1), np.linalg.norm(wanted[:, None] - wanted, axis=-1)
    np.testing.assert_allclose(apart[0] / apart[0].max(), apart[1] / apart[1].max(), rtol=0, atol=0.002)


def test_corners_of_a_chessboard_stand_where_they_are(board_pictures: list[Path]) -> None:
    for tilt, path in zip(TILTS[:3], board_pictures, strict=False):
        board = find_chessboard(load(path), [(COLUMNS - 1, ROWS - 1)], thorough=True)
        assert board is not None
        assert board.pattern.shape == board.at_px.shape
        true = board_pinhole(tilt).see(corner_grid())
        # the same corners, from whichever end they are counted
        nearest = np.linalg.norm(board.at_px[:, None] - true, axis=-1).min(axis=1)
        assert np.sqrt(np.mean(nearest**2)) < 0.1


def test_pictures_of_the_card_give_the_lens(tmp_path: Path) -> None:
    card = printed_card(draw_card())
    paths = []
    for index, tilt in enumerate(TILTS[:6]):
        there = facing(SIZE, (72.0, 30.0), 3.4, tilts_deg=tilt)
        # the true camera, in the same direction and as far away as shows the card at the same size
        shift = np.array([0, 0, TRUE_FOCAL / 3.4]) - there.turn[:, :2] @ [72.0, 30.0]
        camera = Pinhole(TRUE_FOCAL, TRUE_CENTRE, there.turn, shift, TRUE_DISTORTION)
        picture = photograph(card, (0.0, 0.0), camera, SIZE, Print(noise=0.01, blur_px=0.6), index)
        paths.append(save(tmp_path / f"{index}.png", picture))
    lens = calibrate(paths).lens
    assert {picture.points for picture in lens.pictures} == {16}
    assert lens.rms_px < 0.2
    assert abs(lens.focal_px[0] - TRUE_FOCAL) < 3 * lens.focal_sd_px[0]


def test_a_picture_that_fits_badly_is_named(tmp_path: Path, board_pictures: list[Path]) -> None:
    bent = load(board_pictures[0])
    y, x = np.mgrid[: SIZE[1], : SIZE[0]].astype(np.float32)
    bent = cv2.remap(bent, x + 3 * np.sin(y / 40).astype(np.float32), y, cv2.INTER_LINEAR)
    found = calibrate([*board_pictures[1:], save(tmp_path / "bent.png", bent)], columns=7, rows=5)
    assert found.doubtful == ("bent.png",)


def test_pictures_without_a_board_are_named_and_left_out(tmp_path: Path, board_pictures: list[Path]) -> None:
    empty = save(tmp_path / "empty.png", np.full((SIZE[1], SIZE[0], 3), 120, np.uint8))
    found = calibrate([empty, *board_pictures], columns=7, rows=5)
    assert found.unused == (("empty.png", "shows no whole chessboard and no card"),)
    with pytest.raises(CallError, match=r"needs 5 pictures or more.*has 4 \(empty\.png shows no whole"):
        calibrate([*board_pictures[:4], empty], columns=7, rows=5)


def test_pictures_of_different_sizes_are_refused(tmp_path: Path, board_pictures: list[Path]) -> None:
    turned = save(tmp_path / "turned.png", cv2.rotate(load(board_pictures[0]), 0))
    with pytest.raises(CallError, match=r"of one size.*640 x 480 \(0\.png\) and 480 x 640 \(turned\.png\)"):
        calibrate([*board_pictures[:5], turned], columns=7, rows=5)


def test_too_similar_pictures_are_refused() -> None:
    views = noisy_views(1, 0.1)
    with pytest.raises(CallError, match=r"too alike: the board's tilts differ by \d\.\d degrees at most"):
        fit_lens([views[0]] * 6, SIZE)
    with pytest.raises(
        CallError, match="needs 5 pictures or more that show a whole chessboard or the card, has 4"
    ):
        fit_lens(views[:4], SIZE)


def test_pictures_that_leave_the_focal_length_open_are_refused() -> None:
    rng = np.random.default_rng(3)
    views = []
    for index in range(6):
        at = board_pinhole((2.5 * (index - 2.5), 1.0, 0.0)).see(corner_grid())
        views.append(PatternView(f"{index}.png", corner_grid(), at + rng.normal(0, 0.5, at.shape)))
    with pytest.raises(CallError, match=r"too alike: the focal length is known to \d+\.\d % only"):
        fit_lens(views, SIZE)


@pytest.mark.parametrize(
    ("columns", "rows", "message"), [(9, None, "needs both the columns and the rows"), (9, 2, "has 9 x 2")]
)
def test_a_chessboard_that_cannot_be_is_refused(columns: int, rows: int | None, message: str) -> None:
    with pytest.raises(CallError, match=message):
        calibrate([], columns=columns, rows=rows)
