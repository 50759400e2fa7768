"""The units that specs and plants may use, and what their dimensions are called. Data only; `units` reads it.

pint's notation: name = definition = symbol = further names. Prefixes go with every unit, an exact name wins over a
prefixed one (`min` is the minute, `kt` the knot). Angle, cycle and level are dimensions of their own; the
temperature scales are plain multiples of the kelvin here, `units` adds their zeros where a point of a scale is meant.
"""

from __future__ import annotations

DEFINITIONS = """
nano- = 1e-9 = n-
micro- = 1e-6 = u-
milli- = 1e-3 = m-
centi- = 1e-2 = c-
deci- = 1e-1 = d-
hecto- = 1e2 = h-
kilo- = 1e3 = k-
mega- = 1e6 = M-
giga- = 1e9 = G-
tera- = 1e12 = T-
meter = [length] = m = metre
kilogram = [mass] = kg
second = [time] = s = sec
ampere = [current] = A
kelvin = [temperature] = K
mole = [substance] = mol
candela = [luminosity] = cd
radian = [angle] = rad
cycle = [cycle]
decibel = [level] = dB
gram = 1e-3 * kilogram = g
tonne = 1e3 * kilogram = t
minute = 60 * second = min
hour = 3600 * second = h = hr
day = 86400 * second = d
degree = 3.14159265358979323846 / 180 * radian = deg
arcminute = degree / 60 = arcmin
revolution = 2 * 3.14159265358979323846 * radian = rev = turn
rpm = revolution / minute
hertz = cycle / second = Hz
percent = 0.01
permille = 0.001
ppm = 1e-6
pu = 1
degC = kelvin
degF = 5 / 9 * kelvin
delta_degC = kelvin
delta_degF = 5 / 9 * kelvin
inch = 0.0254 * meter = in
foot = 0.3048 * meter = ft = feet
yard = 0.9144 * meter = yd
mile = 1609.344 * meter = mi
nautical_mile = 1852 * meter = nmi
knot = 1852 / 3600 * meter / second = kn = kt
kph = kilometer / hour
mph = mile / hour
hectare = 1e4 * meter ** 2 = ha
litre = 1e-3 * meter ** 3 = L = l = liter
gallon = 231 * inch ** 3 = gal
gpm = gallon / minute
pound = 0.45359237 * kilogram = lb
slug = 14.593902937206364 * kilogram
standard_gravity = 9.80665 * meter / second ** 2 = g_0
newton = kilogram * meter / second ** 2 = N
pound_force = 4.4482216152605 * newton = lbf
kilogram_force = 9.80665 * newton = kgf
pascal = newton / meter ** 2 = Pa
bar = 1e5 * pascal
atmosphere = 101325 * pascal = atm
psi = pound_force / inch ** 2
mmHg = 133.322387415 * pascal
joule = newton * meter = J
calorie = 4.184 * joule = cal
BTU = 1055.05585262 * joule
watt = joule / second = W
watt_hour = 3600 * joule = Wh
volt_ampere = watt = VA = var
horsepower = 745.69987158227 * watt = hp
volt = watt / ampere = V
coulomb = ampere * second = C
ampere_hour = 3600 * coulomb = Ah
ohm = volt / ampere
siemens = ampere / volt = S
farad = coulomb / volt = F
henry = volt * second / ampere = H
weber = volt * second = Wb
tesla = weber / meter ** 2 = T
poise = 0.1 * pascal * second = P
"""

# what a quantity of each dimension is called
WORDS = """
1: a plain number
m: a length
m^2: an area
m^3: a volume
kg: a mass
s: a time
rad: an angle
1/s: a rate per time
Hz: a frequency in cycles
Hz/s: a rate of frequency
cycle: a number of cycles
dB: a level in decibels
dB/s: a rate of a level
m/s: a speed
m/s^2: an acceleration
m/s^3: a jerk
rad/s: an angular rate
rad/s^2: an angular acceleration
N: a force
N/s: a rate of force
J: an energy or torque
W: a power
W/s: a rate of power
Pa: a pressure
Pa/s: a rate of pressure
kg/s: a mass flow
kg/s^2: a stiffness
mol/s: a molar flow
m^3/s: a volume flow
m^2/s: a diffusivity
kg/m^3: a density
m^3/kg: a specific volume
J/kg: a specific energy
kg*m^2: a moment of inertia
kg*m/s: a momentum
K: a temperature
K/s: a rate of temperature
J/K: a heat capacity
J/kg/K: a specific heat
W/K: a heat conductance
W/m^2: a heat flux
W/m^2/K: a heat transfer coefficient
W/m/K: a heat conductivity
Pa*s: a viscosity
A: an electric current
A/s: a rate of current
V: a voltage
V/s: a rate of voltage
C: an electric charge
ohm: a resistance
S: a conductance
F: a capacitance
H: an inductance
Wb: a magnetic flux
T: a flux density
mol: an amount of substance
mol/m^3: a concentration
mol/m^3/s: a rate of concentration
N*m/rad: a torsional stiffness
cd: a luminous intensity
"""

# spellings that are common but would be other units, or none, in this notation
HABITS = {"Nm": "N*m", "kNm": "kN*m", "kmh": "km/h", "fps": "ft/s", "cps": "Hz", "hrs": "h", "mins": "min", "secs": "s"}
