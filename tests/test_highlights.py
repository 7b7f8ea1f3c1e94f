"""Clipped highlights: told in per cent, and brightened when that is asked for.

What the lift must do was decided in pinsim and is stated in its documents; held against that here are
counts of pixels made by hand, and plain geometry.
"""

import numpy as np
import pytest
from photo_files import light_of
from PIL import Image

from pinsim import Scene, SceneError
from pinsim.scene.door import read_photo
from pinsim.scene.photo import lifted


def lamp(rows=240, columns=320, radius=20, at=(120, 160), level=0.3):
    """Return sRGB codes of a clipped white disc, soft at its edge, before an even dark ground."""
    y, x = np.mgrid[:rows, :columns]
    away = np.hypot(y - at[0], x - at[1])
    light = np.clip(level + (1.0 - level) * (radius + 4 - away) / 4, level, 1.0)
    v = np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055)
    return np.round(255 * v).astype(np.uint8)[..., None].repeat(3, 2)


def save(path, codes):
    Image.fromarray(codes).save(path)
    return path


@pytest.mark.parametrize("bits", [8, 16])
def test_the_clipped_share_is_counted(tmp_path, bits):
    import imagecodecs

    top = (1 << bits) - 1
    codes = np.full((100, 100, 3), top // 2, np.uint8 if bits == 8 else np.uint16)
    codes[:6, :30, :2] = top  # two channels are pale enough
    codes[50:, :, 1] = top  # one alone is a colour
    path = tmp_path / "photo.png"
    path.write_bytes(imagecodecs.png_encode(codes))
    notes = read_photo(path).notes
    assert notes == (
        "1.8 % of the photo is clipped white: lamps and sky there are drawn no brighter than white "
        "(--highlight-lift to change)",
    )
    codes[:6, :30] = top // 2
    codes[0, :19] = top  # 0.19 %: nobody needs a word
    path.write_bytes(imagecodecs.png_encode(codes))
    assert read_photo(path).notes == ()


def test_a_drawing_with_few_colours_is_not_called_clipped(tmp_path):
    """A chart's white is paper, not a burnt-out lamp: palettes and line art are let be."""
    codes = np.zeros((40, 40), np.uint8)
    codes[:20] = 255
    Image.fromarray(codes > 0).save(tmp_path / "bits.png")
    Image.fromarray(codes).convert("P").save(tmp_path / "palette.png")
    assert read_photo(tmp_path / "bits.png").notes == ()
    assert read_photo(tmp_path / "palette.png").notes == ()


def test_the_lift_is_full_in_the_middle_and_nothing_outside(tmp_path):
    codes = lamp()
    photo = read_photo(save(tmp_path / "photo.png", codes))
    light = lifted(photo, 2.0).linear()
    plain = photo.linear()
    assert light[120, 160] == pytest.approx(4.0, rel=0.02)  # two stops
    dark = plain.max(axis=2) < 0.7
    np.testing.assert_array_equal(light[dark], plain[dark])
    assert (light >= plain).all()
    # Seen from the middle outwards it never gets brighter again, whichever way one looks.
    for ray in (light[120, 160:, 1], light[120, 160::-1, 1], light[120:, 160, 1]):
        assert (np.diff(ray) <= 1e-4).all()


def test_the_lift_climbs_without_steps(tmp_path):
    """Inside a clipped disc it climbs over 1/200 of the diagonal, 10 pixels, as a parabola.

    Its steepest pixel, at the edge, climbs 2/10 of the lift: 0.4 stops of two.
    """
    codes = lamp(1200, 1600, 100, (600, 800))
    light = lifted(read_photo(save(tmp_path / "photo.png", codes)), 2.0).linear()
    across = np.log2(light[600, 800 - 99 : 800 + 100, 1])
    assert np.abs(np.diff(across)).max() < 0.42
    assert across[0] < 0.65
    assert across[14:-14].min() > 1.99


def test_parts_asked_for_alone_are_parts_of_the_whole(tmp_path):
    photo = lifted(read_photo(save(tmp_path / "photo.png", lamp())), 3.0)
    whole = photo.linear()
    np.testing.assert_array_equal(
        photo.linear(slice(90, 131), slice(150, 301)), whole[90:131, 150:301]
    )
    np.testing.assert_array_equal(photo.linear(slice(0, 10)), whole[:10])


def test_the_ragged_clipping_of_a_sunlit_wall_is_left_alone_beside_a_lamp(tmp_path):
    """A wall of grains that clip here and there is no lamp; a disc away from it is one."""
    rng = np.random.default_rng(4)
    codes = lamp(600, 800, 20, (150, 600))
    codes[300:, :500] = rng.choice([215, 255], (300, 500), p=[0.6, 0.4])[..., None]
    photo = read_photo(save(tmp_path / "photo.png", codes))
    light = lifted(photo, 2.0).linear()
    np.testing.assert_allclose(light[310:, :490], photo.linear()[310:, :490], rtol=0.02)
    assert light[150, 600] == pytest.approx(4.0, rel=0.02)


def test_what_is_not_clipped_itself_stays_as_it_is_before_a_bright_sky(tmp_path):
    """Twigs finer than the cells that the lift is worked out on: one dark, one nearly as bright."""
    codes = np.full((1200, 2400, 3), 90, np.uint8)
    codes[:600] = 255
    codes[:600, 801] = 30
    codes[:600, 1001] = 200
    photo = read_photo(save(tmp_path / "photo.png", codes))
    bright = lifted(photo, 2.0)
    assert bright.lift.cell_px == 2
    twigs = np.s_[:600, [801, 1001]]
    np.testing.assert_array_equal(bright.linear()[twigs], photo.linear()[twigs])
    assert bright.linear()[200, 200] == pytest.approx(4.0, rel=0.01)


def test_one_clipped_channel_is_a_colour_and_is_left_alone(tmp_path):
    codes = np.full((100, 100, 3), (60, 120, 200), np.uint8)
    codes[20:60, 20:60, 2] = 255
    photo = read_photo(save(tmp_path / "photo.png", codes))
    same = lifted(photo, 2.0)
    np.testing.assert_array_equal(same.linear(), photo.linear())
    assert same.notes[-1] == "highlight lift changes nothing: no white in it is clipped"


def test_lamps_burn_out_towards_white(tmp_path):
    codes = lamp()
    codes[codes[..., 0] == 255] = (255, 255, 190)
    photo = read_photo(save(tmp_path / "photo.png", codes))
    before, after = photo.linear()[120, 160], lifted(photo, 2.0).linear()[120, 160]
    assert before[2] / before[0] == pytest.approx(light_of(190), rel=1e-4)
    assert before[2] / before[0] < after[2] / after[0] < 1.0


def test_a_large_photo_is_lifted_like_a_small_one(tmp_path):
    """Worked out on cells of several pixels, the same picture gets the same lift."""
    codes = lamp(300, 400, 30, (150, 200))
    small = lifted(read_photo(save(tmp_path / "s.png", codes)), 2.0)
    big = codes.repeat(8, axis=0).repeat(8, axis=1)
    large = lifted(read_photo(save(tmp_path / "l.png", big)), 2.0)
    assert large.lift.cell_px > 1
    inner = np.s_[135:166, 185:216]
    means = large.linear().reshape(300, 8, 400, 8, 3).mean(axis=(1, 3))
    np.testing.assert_allclose(means[inner], small.linear()[inner], rtol=0.02)
    assert means.sum() == pytest.approx(small.linear().sum(), rel=0.02)


def test_a_panorama_is_lifted_across_its_seam(tmp_path):
    codes = lamp(800, 1600, 12, (400, 800))
    turned = np.roll(codes, 794, axis=1)  # a quarter of the lamp left, three quarters right
    middle = Scene.load(
        save(tmp_path / "m.png", codes), projection="equirectangular", highlight_lift_stops=2.0
    )
    seam = Scene.load(
        save(tmp_path / "s.png", turned), projection="equirectangular", highlight_lift_stops=2.0
    )
    np.testing.assert_allclose(
        np.roll(seam.photo.linear(), -794, axis=1), middle.photo.linear(), atol=1e-5
    )


def test_a_photo_all_white_and_light_that_was_never_clipped(tmp_path):
    white = read_photo(save(tmp_path / "white.png", np.full((20, 30, 3), 255, np.uint8)))
    np.testing.assert_allclose(lifted(white, 1.0).linear(), 2.0, rtol=1e-5)
    scene = Scene.from_light(np.full((20, 30, 3), 5.0), horizontal_view_deg=60)
    same = lifted(scene.photo, 2.0)
    np.testing.assert_array_equal(same.linear(), scene.photo.linear())
    assert same.notes == ("highlight lift changes nothing: it holds its light unclipped",)


def test_the_lift_can_stand_in_a_scene_file_and_the_line_comes_first(tmp_path):
    save(tmp_path / "photo.png", lamp())
    file = tmp_path / "scene.toml"
    file.write_text(
        'photo = "photo.png"\nhorizontal_view = "60 deg"\n[light]\nhighlight_lift = 1\n'
    )
    assert Scene.load(file).photo.linear().max() == pytest.approx(2.0, rel=0.02)
    assert Scene.load(file, highlight_lift_stops=3.0).photo.linear().max() > 7.5
    plain = Scene.load(file, highlight_lift_stops=0.0)
    assert plain.photo.linear().max() == 1.0
    note = next(note for note in Scene.load(file).notes if "lift" in note)
    assert "up to 1 stops" in note
    assert "invented" in note


@pytest.mark.parametrize("value", [-1.0, 20.0, float("nan")])
def test_an_impossible_lift_is_refused(tmp_path, value):
    path = save(tmp_path / "photo.png", lamp())
    with pytest.raises(SceneError, match=r"highlight lift is .* stops; it must be 0 to 6 stops"):
        Scene.load(path, horizontal_view_deg=60, highlight_lift_stops=value)


@pytest.mark.parametrize("text", ['"2 stops"', "true", "9"])
def test_a_wrong_lift_in_a_file_is_named(tmp_path, text):
    save(tmp_path / "photo.png", lamp())
    file = tmp_path / "scene.toml"
    file.write_text(
        f'photo = "photo.png"\nhorizontal_view = "60 deg"\n[light]\nhighlight_lift = {text}\n'
    )
    with pytest.raises(SceneError, match=r"scene.toml \[light\]: highlight_lift is"):
        Scene.load(file)
