"""Words that the HTML report and the PDF report share."""

FOLDED = "screen map"
"""Nuisances whose names begin so are many and alike: a report sets them apart."""

SIMULATED_SAID = "Simulated bench: invented data. No real part was measured."
STANDING_CAUTIONS = (
    "The program is an administrative control and no safety function: hard-wired"
    " interlocks, local rules and the local laser safety officer decide.",
    "Nothing in this report classifies a laser or authorises its use.",
)

TRACKS_SAID = (
    "Where every beam met the screen while the stage turned. Markers are readings,"
    " lines the one fit to all of them, numbers the diffraction order. Grey crosses"
    " are spots that were not used; the grey band is the hole through which the"
    " beam comes. Reflection (order 0) obeys its law whatever the pitch and so"
    " calibrates screen, camera and stage for the others."
)
RESIDUALS_SAID = (
    "What the fit leaves over, in units of each reading's stated uncertainty. A"
    " sound fit scatters about zero without a pattern, about 95 of 100 points in"
    " the grey band, and with an rms near 1 in every order."
)
PITCHES_SAID = (
    "The pitch that parts of the data give, as difference from the result (in"
    " brackets the number of spots). Thick bars are one, thin bars two standard"
    " uncertainties of that difference; the green band is the result's expanded"
    " uncertainty U. Parts that disagree would show an error that the fit does"
    " not know."
)
BUDGET_SAID = (
    "What the uncertainty is made of. Hatched bars (kind A) come from the scatter"
    " of the readings, plain bars (kind B) from what is known beforehand. Shares"
    " are of the variance and add up to 100 %."
)
FRAMES_SAID = (
    "Frames of the camera, brightness on a logarithmic scale, dark is bright."
    " Circles: spots used, with their order. Crosses: candidates not used, with"
    " the reason."
)
NUISANCES_SAID = (
    "Quantities of bench, stage and mount that the same fit determines. The last"
    " column is how far each moved from what was known before, in units of the"
    " uncertainty known before."
)
DRAWN_SAID = "All inputs drawn at random (JCGM 101)"
PREDICTED_SAID = "Predicted with the model of this fit; no readings are invented."
DIGITS_SAID = (
    "The pitch is stated with the expanded uncertainty U = k u. Digits beyond the"
    " second of the uncertainty are not given."
)
