"""sRGB to linear light and back.

Source: IEC 61966-2-1 (constants read in an archived copy); the values of the two tables were computed
independently with the package colour-science 0.4.7.
"""

import numpy as np
import pytest
from PIL import Image

from pinsim.colour import encode_8bit, encode_16bit, linear_to_srgb, srgb_table, srgb_to_linear
from pinsim.render.resample import resample_part, whole

ENCODED = {
    0.0031308: 0.0404499,
    0.01: 0.0998528,
    0.05: 0.2478005,
    0.1: 0.3491902,
    0.18: 0.4613561,
    0.2140411: 0.5,
    0.5: 0.7353570,
}
DECODED = {
    1: 0.00030353,
    10: 0.00303527,
    11: 0.00334654,
    55: 0.03820437,
    99: 0.12477182,
    118: 0.18116424,
    127: 0.21223076,
    128: 0.21586050,
    186: 0.49102085,
    188: 0.50288646,
    200: 0.57758044,
    254: 0.99110210,
}
TABLE_DIGITS = 6e-8  # the encode table has seven places
CODE_DIGITS = 6e-9  # the decode table has eight


@pytest.mark.parametrize(("light", "encoded"), ENCODED.items())
def test_light_is_encoded_as_the_standard_says(light, encoded):
    assert float(linear_to_srgb(light)) == pytest.approx(encoded, abs=TABLE_DIGITS)


@pytest.mark.parametrize(("code", "light"), DECODED.items())
def test_codes_are_decoded_as_the_standard_says(code, light):
    assert float(srgb_to_linear(code / 255)) == pytest.approx(light, abs=CODE_DIGITS)
    assert srgb_table(8)[code] == pytest.approx(light, rel=2e-7, abs=CODE_DIGITS)


def test_black_and_white_stay_exact():
    for bits in (8, 16):
        assert srgb_table(bits)[0] == 0.0
        assert srgb_table(bits)[-1] == 1.0
    assert encode_8bit(np.float32([0.0, 1.0])).tolist() == [0, 255]
    assert encode_16bit(np.float32([0.0, 1.0])).tolist() == [0, 65535]


def test_sixteen_bit_codes_come_back_from_light_unchanged():
    np.testing.assert_array_equal(encode_16bit(srgb_table(16)), np.arange(65536))


def test_eight_bit_codes_come_back_from_light_unchanged(frozen):
    np.testing.assert_array_equal(encode_8bit(frozen(srgb_table(8))), np.arange(256))


def test_the_fast_encoder_is_at_most_one_code_from_exact_rounding(frozen):
    """Written out here with the standard's own constants, in double precision."""
    light = frozen(np.linspace(0.0, 1.0, 300_001, dtype=np.float32))
    wide = light.astype(np.float64)
    exact = np.where(wide <= 0.0031308, 12.92 * wide, 1.055 * wide ** (1 / 2.4) - 0.055)
    rounded = np.floor(255.0 * exact + 0.5)
    wrong = np.abs(encode_8bit(light).astype(int) - rounded)
    assert wrong.max() <= 1
    # One code off only at a rounding border: the value itself is never farther than 0.6 of a code.
    assert np.abs(encode_8bit(light) - 255.0 * exact).max() < 0.6
    assert (wrong > 0).mean() < 0.01


def test_light_beyond_the_scale_is_clipped_and_never_wraps():
    beyond = np.float32([-1.0, -1e-9, 1.0000001, 1.5, 1e9, np.inf])
    assert encode_8bit(beyond).tolist() == [0, 0, 255, 255, 255, 255]
    assert encode_16bit(beyond).tolist() == [0, 0, 65535, 65535, 65535, 65535]


def test_tables_cannot_be_written_to():
    with pytest.raises(ValueError, match=r"read-only"):
        srgb_table(8)[0] = 1.0


def test_a_checkerboard_averages_in_linear_light_to_code_188():
    """Half the light of white is sRGB code 188 (0.5 -> 0.7353570 x 255 = 187.5), not 128."""
    board = np.indices((64, 64)).sum(axis=0) % 2
    light = np.repeat(board[..., None], 3, axis=2).astype(np.float32)
    small = resample_part(light, whole(light), (8, 8))
    assert np.abs(encode_8bit(small[2:-2, 2:-2]).astype(int) - 188).max() <= 1
    plain = np.asarray(Image.fromarray((255 * board).astype(np.uint8)).resize((8, 8), 4))
    assert abs(int(plain[4, 4]) - 188) > 50  # what averaging codes would give
