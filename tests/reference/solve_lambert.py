"""Current of a source, a resistor and a junction in series by the Lambert W function, to 20 digits.

V = R i + n V_T ln(1 + i / I_S)  gives  i = (n V_T / R) W(I_S R / (n V_T) exp((V + I_S R) / (n V_T))) - I_S
(Banwell and Jayakumar, Electronics Letters 36 (2000) 291). The junction is at 25 °C.

Usage: python3 solve_lambert.py > solve_lambert.csv
"""
import mpmath as mp

mp.mp.dps = 50
V_T = mp.mpf("1.380649e-23") * mp.mpf("298.15") / mp.mpf("1.602176634e-19")
print("volts,ohms,saturation_current,emission_coefficient,amperes")
for volts in ("-20", "-0.05", "0.01", "0.3", "0.65", "1", "5", "48", "400"):
    for ohms in ("0.001", "1", "470", "1e5", "1e9"):
        for i_s, n in (("1e-14", "1"), ("2.5e-9", "1.75"), ("1e-6", "1.05")):
            s, fold = mp.mpf(float(i_s)), mp.mpf(float(n)) * V_T
            v, r = mp.mpf(float(volts)), mp.mpf(float(ohms))
            # W(z) for z = exp(x) beyond any double: mpmath has the range.
            i = fold / r * mp.lambertw(s * r / fold * mp.exp((v + s * r) / fold)).real - s
            print(",".join([volts, ohms, i_s, n, mp.nstr(i, 20)]))
