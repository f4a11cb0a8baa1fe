"""The colours of false-colour pictures: told apart by colour-blind eyes, the same on the page's scale."""

import numpy as np

from skykiln.report.ramp import coloured, css_gradient, linear_ramp, ramp

# Red and green cones missing, for linear Rec. 709: Vienot, Brettel and Mollon 1999, "Digital video
# colourmaps for checking the legibility of displays by dichromats" (numbers from memory).
PROTAN = np.array([[0.11238, 0.88762, 0], [0.11238, 0.88762, 0], [0.00401, -0.00401, 1]])
DEUTAN = np.array([[0.29275, 0.70725, 0], [0.29275, 0.70725, 0], [-0.02234, 0.02234, 1]])


def test_lightness_rises_from_end_to_end_for_colour_blind_eyes():
    for eye in (PROTAN, DEUTAN):
        lightness = np.cbrt((linear_ramp(17) @ eye.T) @ [0.2126, 0.7152, 0.0722])
        steps = np.diff(lightness)
        assert steps.min() > 0.3 * steps.mean()


def test_shares_beyond_the_ends_have_the_colours_of_the_ends():
    assert (coloured(np.array([-1, 0, 1, 9])) == ramp()[[0, 0, 255, 255]]).all()
    assert (np.diff(ramp().astype(int).sum(1)) >= -3).all()


def test_scale_on_the_page_has_the_ends_of_the_ramp():
    text = css_gradient()
    assert f"#{bytes(ramp()[0]).hex()}" in text
    assert text.endswith(f"#{bytes(ramp()[255]).hex()})")
