"""Two small files of titrations for the tests of a run. All waters are invented.

Their curves are the closed form of bicarbonate water while strong acid goes in: ideal, at 25 °C, hydroxide and carbonate
left out. That is all a run needs.
"""

import numpy as np

HEADER = "sample_id,titrant_ml,ph"
FACTS = "sample_id,sample_volume_ml,titrant_eq_l,temperature_c,conductivity_us_cm,filtered"


def ph_of(volume, alkalinity, strength, sample_ml=100.0, carbon=0.0):
    """pH by pK1 6.352: alkalinity left is dic k1/(k1 + h) - h, so h^2 + (left + k1) h + k1 (left - dic) is 0."""
    share = sample_ml / (sample_ml + volume)
    left, dic, k1 = share * (alkalinity - strength * volume / sample_ml), share * carbon, 10.0**-6.352
    return float(-np.log10(0.5 * (-(left + k1) + np.sqrt((left + k1) ** 2 - 4.0 * k1 * (left - dic)))))


def points(name, alkalinity, *, strength=0.02, carbon=None, past=6e-4, count=25):
    """Lines of the file of points of one water, even steps of titrant."""
    carbon = 1.15 * max(alkalinity, 0.0) + 3e-5 if carbon is None else carbon
    volumes = np.round(np.linspace(0.0, (max(alkalinity, 0.0) + past) * 100.0 / strength, count), 3)
    return "".join(f"{name},{v:g},{ph_of(v, alkalinity, strength, carbon=carbon):.3f}\n" for v in volumes)


def facts(name, *, strength="0.02", filtered="yes", conductivity="250", t_c="25"):
    """Line of the file of samples."""
    return f"{name},100,{strength},{t_c},{conductivity},{filtered}\n"


SOFT, HARD, ACID = points("soft", 1e-4), points("hard", 2e-3, strength=0.05), points("acid", -5e-5)
BROKEN = "broken,0,7\nbroken,1,44\n"
POINTS = f"{HEADER}\n{SOFT}{HARD}{BROKEN}{ACID}"
SAMPLES = f"{FACTS}\n" + facts("soft", filtered="no", conductivity="15") + facts("hard", strength="0.05") + facts("broken") + facts("acid", conductivity="28")
