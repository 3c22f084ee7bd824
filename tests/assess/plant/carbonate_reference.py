"""Carbonate water worked out a second time, in 40 digits; nothing of aquabuf is used.

Constants: Plummer & Busenberg 1982 (printed in their abstract), ion product of water IAPWS R11-07 (coefficients
recalled), Davies 1962 with 0.3, slope of Debye and Hueckel from first principles with the density of Kell 1975 and the
dielectric constant of Bradley & Pitzer 1979 (coefficients recalled), 0.1 I for neutral species, bisulfate of Goldberg
et al. 2002 (recalled). Calcium pairs with bicarbonate and carbonate. Amounts in mol/L, alkalinity in eq/L, temperature
in °C, pH is the activity a meter reads.
"""

import mpmath as mp

DIGITS = 40
PLUMMER_BUSENBERG = {  # log10 K = a + b T + c/T + d log10 T + e/T^2
    "k1": ("-356.3094", "-0.06091964", "21834.37", "126.8339", "-1684915"),
    "k2": ("-107.8871", "-0.03252849", "5151.79", "38.92561", "-563713.9"),
    "calcite": ("-171.9065", "-0.077993", "2839.319", "71.595", "0"),
    "cahco3": ("1209.120", "0.31294", "-34765.05", "-478.782", "0"),
    "caco3": ("-1228.732", "-0.299444", "35512.75", "485.818", "0"),
}
GAS_CONSTANT = "8.314462618"


def printed_k(name, t_c):
    """A constant of Plummer & Busenberg."""
    a, b, c, d, e = (mp.mpf(x) for x in PLUMMER_BUSENBERG[name])
    t = mp.mpf(t_c) + mp.mpf("273.15")
    return mp.power(10, a + b * t + c / t + d * mp.log10(t) + e / t**2)


def density(t_c):
    """Kell 1975. [kg/L]"""
    t = mp.mpf(t_c)
    above = sum(mp.mpf(c) * t**n for n, c in enumerate(
        ("999.83952", "16.945176", "-7.9870401e-3", "-46.170461e-6", "105.56302e-9", "-280.54253e-12")))
    return above / (1 + mp.mpf("16.879850e-3") * t) / 1000


def debye_huckel_a(t_c):
    """1.824829e6 sqrt(rho) (eps T)^-1.5 with the dielectric constant of Bradley & Pitzer at 1 bar."""
    t = mp.mpf(t_c) + mp.mpf("273.15")
    u = [mp.mpf(x) for x in ("342.79", "-5.0866e-3", "9.4690e-7", "-2.0525", "3115.9", "-182.89", "-8032.5", "4.2142e6",
                             "2.1417")]
    b = u[6] + u[7] / t + u[8] * t
    eps = u[0] * mp.exp(u[1] * t + u[2] * t**2) + (u[3] + u[4] / (u[5] + t)) * mp.log((b + 1) / (b + 1000))
    return mp.mpf("1.824829e6") * mp.sqrt(density(t_c)) * (eps * t) ** mp.mpf("-1.5")


def k_water(t_c):
    """IAPWS R11-07 (Bandura & Lvov 2006), n = 6."""
    t, rho = mp.mpf(t_c) + mp.mpf("273.15"), density(t_c)
    q = rho * mp.exp(mp.mpf("-0.864671") + mp.mpf("8659.19") / t - mp.mpf("22786.2") * rho ** (mp.mpf(2) / 3) / t**2)
    gas = mp.mpf("0.61415") + mp.mpf("48251.33") / t - mp.mpf("67707.93") / t**2 + mp.mpf("10102100") / t**3
    cluster = mp.log10(1 + q) - q / (q + 1) * rho * (mp.mpf("0.642044") - mp.mpf("56.8534") / t - mp.mpf("0.375754") * rho)
    return mp.power(10, -(-12 * cluster + gas + 2 * mp.log10(mp.mpf("0.018015268"))))


def k_bisulfate(t_c):
    """pK 1.987, enthalpy -22.4 kJ/mol, heat capacity -258 J/mol/K, by integrated van 't Hoff."""
    t, t0, r = mp.mpf(t_c) + mp.mpf("273.15"), mp.mpf("298.15"), mp.mpf(GAS_CONSTANT)
    heat, capacity = mp.mpf("-22400") / r, mp.mpf("-258") / r
    return mp.power(10, mp.mpf("-1.987")) * mp.exp(-heat * (1 / t - 1 / t0) + capacity * (t0 / t - 1 + mp.log(t / t0)))


class Constants:
    """What the balance needs at one temperature and ionic strength; h is the activity of H+."""

    def __init__(self, t_c, strength):
        a, i = debye_huckel_a(t_c), mp.mpf(strength)
        root = mp.sqrt(i)
        self.rho = density(t_c)
        g0 = mp.power(10, i / 10)
        g1, g2 = (mp.power(10, -a * z**2 * (root / (1 + root) - mp.mpf("0.3") * i)) for z in (1, 2))
        self.k1, self.k2 = printed_k("k1", t_c) * g0 / g1, printed_k("k2", t_c) * g1 / g2
        self.c_h, self.c_oh = self.rho / g1, k_water(t_c) / g1 * self.rho
        self.bisulfate = k_bisulfate(t_c) * g1 / g2
        self.calcite = printed_k("calcite", t_c) / g2**2 * self.rho**2
        self.cahco3 = printed_k("cahco3", t_c) * g2 / self.rho
        self.caco3 = printed_k("caco3", t_c) * g2**2 / g0 / self.rho

    def charge(self, ph):
        """Mean charge of carbon, OH- less H+, and the share of sulfate that is bisulfate."""
        h = mp.power(10, -mp.mpf(ph))
        weights = [mp.mpf(1), self.k1 / h, self.k1 * self.k2 / h**2]
        mean = (weights[1] + 2 * weights[2]) / sum(weights)
        return mean, self.c_oh / h - self.c_h * h, h / (self.bisulfate + h)


def alkalinity(ph, carbon, t_c, strength, sulfate=0):
    """Alkalinity at a pH."""
    mean, water, acid = Constants(t_c, strength).charge(ph)
    return mp.mpf(carbon) * mean + water - mp.mpf(sulfate) * acid


def carbon_of(ph, alk, t_c, strength, sulfate=0):
    """Inorganic carbon of a pH and an alkalinity."""
    mean, water, acid = Constants(t_c, strength).charge(ph)
    return (mp.mpf(alk) - water + mp.mpf(sulfate) * acid) / mean


def rooted(f, low, high):
    """Root between two ends of different sign by regula falsi with Illinois weights. ValueError where the signs agree."""
    low, high = mp.mpf(low), mp.mpf(high)
    f_low, f_high = f(low), f(high)
    if f_low * f_high > 0:
        raise ValueError("no change of sign")
    for _ in range(200):
        if not f_high or abs(high - low) <= mp.mpf(10) ** -30 * abs(high):
            break
        new = high - f_high * (high - low) / (f_high - f_low)
        f_new = f(new)
        low, f_low = (high, f_high) if f_new * f_high <= 0 else (low, f_low / 2)
        settled = abs(new - high) <= mp.mpf(10) ** -30 * abs(new)
        high, f_high = new, f_new
        if settled:
            break
    return high


def ph_of(alk, carbon, t_c, strength, sulfate=0):
    """pH of an alkalinity and carbon."""
    return rooted(lambda x: alkalinity(x, carbon, t_c, strength, sulfate) - mp.mpf(alk), 0, 14)


def free_calcium(c, ph, amount, calcium, co2_weight, carbonate_weight):
    """Free calcium and bicarbonate where co2_weight CO2 + HCO3 + carbonate_weight CO3 (pairs counted) is `amount`."""
    h = mp.power(10, -mp.mpf(ph))
    q, r = h / c.k1, c.k2 / h

    def bicarbonate(ca):
        return amount / (co2_weight * q + 1 + c.cahco3 * ca + carbonate_weight * r * (1 + c.caco3 * ca))

    paired = c.cahco3 + r * c.caco3  # x (1 + paired bicarbonate(x)) = calcium is a quadratic in x
    flat, steep = co2_weight * q + 1 + carbonate_weight * r, c.cahco3 + carbonate_weight * r * c.caco3
    b = flat + amount * paired - calcium * steep
    ca = 2 * calcium * flat / (b + mp.sqrt(b**2 + 4 * steep * calcium * flat))
    return ca, bicarbonate(ca)


def total_carbon(c, ph, ca, bicarbonate):
    """CO2, bicarbonate and carbonate with their pairs."""
    h = mp.power(10, -mp.mpf(ph))
    q, r = h / c.k1, c.k2 / h
    return bicarbonate * (q + 1 + c.cahco3 * ca + r * (1 + c.caco3 * ca))


def saturation(ph, alk, calcium, t_c, strength):
    """Saturation index of calcite and carbon with its pairs, at a pH and an alkalinity."""
    c = Constants(t_c, strength)
    ca, bicarbonate = free_calcium(c, ph, mp.mpf(alk) - c.charge(ph)[1], mp.mpf(calcium), 0, 2)
    product = ca * bicarbonate * c.k2 / mp.power(10, -mp.mpf(ph))
    return mp.log10(product / c.calcite), total_carbon(c, ph, ca, bicarbonate)


def potential(ph, alk, calcium, t_c, strength):
    """Calcite that falls out (above 0) or dissolves until the index is zero, and the pH then; ionic strength held.

    x moles take 2 x of alkalinity, x of carbon and x of calcium. With x as the unknown the pH of each step follows from
    alkalinity and carbon, pairs counted.
    """
    c = Constants(t_c, strength)
    carbon = saturation(ph, alk, calcium, t_c, strength)[1]

    def ph_after(x):
        def off(p):
            amount = mp.mpf(alk) - 2 * x - c.charge(p)[1]
            ca, bicarbonate = free_calcium(c, p, amount, mp.mpf(calcium) - x, 0, 2)
            return total_carbon(c, p, ca, bicarbonate) - (carbon - x)
        low, high = mp.mpf(4), mp.mpf("12.5")
        while mp.mpf(alk) - 2 * x - c.charge(high)[1] <= 0:
            high -= mp.mpf("0.05")
        return rooted(off, low, high)

    def index(x):
        return saturation(ph_after(x), mp.mpf(alk) - 2 * x, mp.mpf(calcium) - x, t_c, strength)[0]

    most = min(mp.mpf(calcium), carbon, mp.mpf(alk) / 2) * mp.mpf("0.999")
    x = rooted(index, -mp.mpf("5e-3"), most)
    return x, ph_after(x)
