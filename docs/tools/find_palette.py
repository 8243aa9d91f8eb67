"""Search for the categorical colours of the figures: eight that all eyes can tell apart.

    python docs/tools/find_palette.py [seconds]

Starts from eight hues one would like (blue, orange, green, …) and exchanges one colour at a time against a grid of sRGB
colours: as near as may be to the hues, under the condition that the CIEDE2000 difference of any two is `LEAST` or more,
unsimulated and under severity-1.0 protanopia, deuteranopia and tritanopia (Machado, Oliveira & Fernandes, IEEE Trans. Vis.
Comput. Graph. 15, 1291 (2009), in linear RGB). Candidates have a contrast of 3:1 to white at least (W3C, WCAG 2.2, 1.4.11).
Prints the best set in the order of the wishes; it stands in skyoptics/figures/palette.py.
"""

import itertools
import sys
import time

import colour
import numpy as np

KINDS = ("Protanomaly", "Deuteranomaly", "Tritanomaly")
WISHES = ("#0057b8", "#d05000", "#007a4d", "#8a2be2", "#1593b5", "#a88400", "#c2388a", "#141a56")
LEAST = 13.0


def views(srgb):
    """Return CIELAB of colours, unsimulated and as the three kinds of eyes see them, shape (4, m, 3)."""
    linear = colour.models.eotf_sRGB(srgb)
    seen = [linear, *(np.clip(linear @ colour.matrix_cvd_Machado2009(kind, 1.0).T, 0.0, 1.0) for kind in KINDS)]
    return np.array([colour.XYZ_to_Lab(colour.RGB_to_XYZ(one, "sRGB")) for one in seen])


def candidates():
    """Return sRGB colours of a grid, not too pale on white."""
    srgb = np.array(list(itertools.product(np.arange(0, 256, 17) / 255.0, repeat=3)))
    luminance = colour.models.eotf_sRGB(srgb) @ np.array([0.2126, 0.7152, 0.0722])
    return srgb[(1.05 / (luminance + 0.05) >= 3.0) & (views(srgb)[0, :, 0] > 10.0)]


def differences(one, other):
    """Return CIEDE2000 of all pairs, the smallest of the four views."""
    return np.min(
        [colour.delta_E(a[:, None], b[None], method="CIE 2000") for a, b in zip(one, other, strict=True)], axis=0
    )


def main():
    """Search, print."""
    seconds = float(sys.argv[1]) if len(sys.argv) > 1 else 30.0
    srgb = candidates()
    lab = views(srgb)
    apart = np.concatenate([differences(lab[:, part], lab) for part in np.array_split(np.arange(len(srgb)), 20)])
    wished = views(np.array([[int(word[k : k + 2], 16) / 255.0 for k in (1, 3, 5)] for word in WISHES]))
    far = colour.delta_E(wished[0][:, None], lab[0][None], method="CIE 2000")
    random = np.random.default_rng(1)
    best, least, end = None, np.inf, time.monotonic() + seconds
    while time.monotonic() < end:
        chosen = [int(random.choice(np.argsort(row)[:60])) for row in far]
        cost, before = np.inf, None
        while before is None or cost < before - 1e-9:
            before = cost
            for place in random.permutation(len(WISHES)):
                rest = [one for k, one in enumerate(chosen) if k != place]
                short = np.maximum(LEAST - apart[:, rest], 0.0).sum(axis=1)
                chosen[place] = int((far[place] + 10.0 * short).argmin())
            pairs = apart[np.ix_(chosen, chosen)][np.triu_indices(len(chosen), 1)]
            away = sum(far[k, one] for k, one in enumerate(chosen))
            cost = away + 10.0 * np.maximum(LEAST - pairs, 0.0).sum()
        if cost < least and pairs.min() >= LEAST:
            best, least = list(chosen), cost
    pairs = apart[np.ix_(best, best)][np.triu_indices(len(best), 1)]
    print(f"smallest CIEDE2000 difference {pairs.min():.2f}")
    for one in best:
        print("#" + "".join(f"{round(255 * value):02x}" for value in srgb[one]), np.round(lab[0, one], 1))


if __name__ == "__main__":
    main()
