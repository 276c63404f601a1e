"""Constants of the gas components: molar mass, critical point, acentric factor, spellings.

The first table holds the 21 components of GERG-2008, the second those that only the optional
CoolProp knows. Columns: name, molar mass [g/mol], critical temperature [K], critical pressure
[bar], critical volume [cm3/mol], acentric factor, name in CoolProp.

Sources: molar masses of the first table are those of GERG-2008 [1]_ as its public reference code
has them; everything else is the critical point and acentric factor of the reference equation of
state of that fluid, printed once from CoolProp 8.0.0 [2]_.

References
----------
.. [1] O. Kunz and W. Wagner, *J. Chem. Eng. Data* 57 (2012) 3032-3091; code of NIST
   (usnistgov/AGA8).
.. [2] I. H. Bell et al., *Ind. Eng. Chem. Res.* 53 (2014) 2498-2508.
"""

from __future__ import annotations

from typing import NamedTuple

_GERG_ROWS = """
methane               16.04246  190.564   45.992   98.63   0.0114  Methane
nitrogen               28.0134  126.192   33.958   89.41   0.0372  Nitrogen
carbon_dioxide         44.0095  304.128   73.773   94.12   0.2239  CarbonDioxide
ethane                30.06904  305.322   48.722  145.84   0.0990  Ethane
propane               44.09562  369.890   42.512  200.00   0.1521  Propane
isobutane              58.1222  407.810   36.290  257.75   0.1835  IsoButane
n_butane               58.1222  425.125   37.960  254.92   0.2008  n-Butane
isopentane            72.14878  460.350   33.782  305.72   0.2274  Isopentane
n_pentane             72.14878  469.700   33.675  311.53   0.2510  n-Pentane
hexane                86.17536  507.820   30.441  369.58   0.3003  n-Hexane
heptane              100.20194  541.226   27.738  445.54   0.3490  n-Heptane
octane               114.22852  568.740   24.836  492.36   0.3975  n-Octane
nonane                128.2551  594.548   22.819  552.44   0.4433  n-Nonane
decane               142.28168  617.699   21.013  609.75   0.4884  n-Decane
hydrogen               2.01588   33.144   12.964   64.51  -0.2190  Hydrogen
oxygen                 31.9988  154.599   50.464   74.95   0.0222  Oxygen
carbon_monoxide        28.0101  132.860   34.982   92.16   0.0497  CarbonMonoxide
water                 18.01528  647.096  220.640   55.95   0.3443  Water
hydrogen_sulfide      34.08088  373.101   89.989   98.15   0.1005  HydrogenSulfide
helium                4.002602    5.195    2.283   57.52  -0.3835  Helium
argon                   39.948  150.687   48.630   74.59  -0.0022  Argon
"""

_OTHER_ROWS = """
ethylene              28.05376  282.350   50.417  130.95   0.0866  Ethylene
propylene             42.07974  364.211   45.550  183.25   0.1460  Propylene
ammonia               17.03052  405.560  113.634   73.01   0.2557  Ammonia
1_butene              56.10632  419.290   40.057  235.85   0.1919  1-Butene
isobutene             56.10632  418.090   40.157  239.81   0.1926  IsoButene
cis_2_butene          56.10632  435.750   42.360  235.63   0.2024  cis-2-Butene
trans_2_butene        56.10632  428.611   40.191  237.37   0.2101  trans-2-Butene
propyne                  40.06  402.701   56.575  161.07   0.2040  Propyne
cyclopropane            42.081  398.692   56.053  163.50   0.1305  CycloPropane
cyclopentane           70.1329  511.720   45.828  255.10   0.2019  Cyclopentane
cyclohexane           84.15948  553.600   40.805  310.17   0.2093  CycloHexane
neopentane            72.14878  433.740   31.963  305.81   0.1961  Neopentane
isohexane             86.17536  497.701   30.427  368.33   0.2797  Isohexane
benzene                78.1118  562.020   49.063  256.28   0.2108  Benzene
toluene               92.13842  591.749   41.263  315.56   0.2657  Toluene
undecane             156.30826  638.800   19.905  660.10   0.5390  n-Undecane
dodecane             170.33484  658.100   18.176  751.68   0.5742  n-Dodecane
methanol              32.04216  513.380   82.159  113.83   0.5649  Methanol
ethanol               46.06844  514.709   62.679  168.61   0.6440  Ethanol
acetone               58.07914  508.100   46.924  212.77   0.3071  Acetone
dimethyl_ether        46.06844  400.378   53.367  168.35   0.1960  DimethylEther
ethylene_oxide        44.05256  468.920   73.047  139.46   0.2102  EthyleneOxide
vinyl_chloride        62.49822  425.000   56.003  176.99   0.1600  VinylChloride
sulfur_dioxide         64.0638  430.640   78.866  123.79   0.2561  SulfurDioxide
carbonyl_sulfide       60.0751  378.770   63.688  134.96   0.0978  CarbonylSulfide
nitrous_oxide          44.0128  309.521   72.448   97.17   0.1613  NitrousOxide
hydrogen_chloride      36.4609  324.680   83.135   84.25   0.1297  HydrogenChloride
chlorine                70.906  416.865   76.424  125.79   0.0700  Chlorine
fluorine              37.99681  144.414   52.395   64.09   0.0449  Fluorine
neon                    20.179   44.400   26.616   41.49  -0.0355  Neon
krypton                 83.798  209.480   55.254   92.19  -0.0009  Krypton
xenon                  131.293  289.733   58.419  119.04   0.0036  Xenon
sulfur_hexafluoride  146.05542  318.723   37.550  196.76   0.2100  SulfurHexafluoride
deuterium               4.0282   38.340   16.796   58.04  -0.1363  Deuterium
r11                    137.368  471.110   44.076  247.96   0.1888  R11
r12                    120.913  385.120   41.362  214.01   0.1795  R12
r13                    104.459  303.050   39.731  181.29   0.1746  R13
r14                    88.0046  227.396   37.625  140.36   0.1785  R14
r21                   102.9227  452.720   52.885  196.87   0.2061  R21
r22                     86.468  369.295   49.900  165.06   0.2208  R22
r23                   70.01385  299.293   48.317  132.98   0.2630  R23
r32                     52.024  351.255   57.826  122.70   0.2769  R32
r40                   50.48752  418.626   69.290  147.76   0.1501  R40
r41                   34.03292  317.279   59.061  107.54   0.2004  R41
r113                   187.375  487.210   33.923  334.60   0.2525  R113
r114                   170.921  420.608   33.525  298.17   0.2523  R114
r115                 154.46642  353.102   31.292  251.26   0.2484  R115
r116                 138.01182  293.030   30.477  225.02   0.2566  R116
r123                   152.931  456.830   36.618  278.05   0.2819  R123
r124                  136.4762  395.428   36.245  244.02   0.2881  R124
r125                  120.0214  339.177   36.183  209.32   0.3052  R125
r134a                  102.032  374.212   40.593  199.30   0.3268  R134a
r141b                116.94962  477.500   42.117  255.03   0.2195  R141b
r142b                100.49503  410.260   40.548  225.32   0.2321  R142b
r143a                   84.041  345.857   37.618  194.99   0.2615  R143a
r152a                   66.051  386.411   45.167  179.49   0.2752  R152A
r161                   48.0595  375.250   50.100  159.16   0.2162  R161
r218                 188.01933  345.020   26.402  299.41   0.3172  R218
r227ea               170.02886  374.900   29.252  286.12   0.3576  R227EA
r236fa                152.0384  398.070   31.909  275.78   0.3769  R236FA
r245fa               134.04794  427.010   36.510  258.14   0.3776  R245fa
r404a                  97.6038  345.270   37.348  202.43   0.2930  R404A
r407c                  86.2036  359.345   46.317  190.11   0.3630  R407C
r410a                  72.5854  344.494   49.012  158.13   0.2960  R410A
r507a                  98.8592  343.765   37.049  201.45   0.2860  R507A
r1234yf               114.0416  367.850   33.844  239.23   0.2760  R1234yf
r1234ze_e            114.04159  382.513   36.349  233.11   0.3131  R1234ze(E)
rc318                 200.0312  388.371   27.775  322.63   0.3553  RC318
"""

# Further spellings, each understood in any case and with blanks, hyphens or underscores anywhere.
_SPELLINGS = """
methane: CH4 C1 | ethane: C2H6 C2 | propane: C3H8 C3 n_propane | nitrogen: N2
carbon_dioxide: CO2 | carbon_monoxide: CO | hydrogen_sulfide: H2S hydrogen_sulphide
isobutane: i_butane iC4 iC4H10 2_methylpropane | n_butane: butane nC4 C4 C4H10 nC4H10
isopentane: i_pentane iC5 iC5H12 2_methylbutane | n_pentane: pentane nC5 C5 C5H12 nC5H12
hexane: n_hexane C6 nC6 C6H14 | heptane: n_heptane C7 nC7 C7H16 | octane: n_octane C8 nC8 C8H18
nonane: n_nonane C9 nC9 C9H20 | decane: n_decane C10 nC10 C10H22
hydrogen: H2 | oxygen: O2 | water: H2O steam water_vapour water_vapor | helium: He | argon: Ar
ethylene: ethene C2H4 | propylene: propene C3H6 | ammonia: NH3 R717 | propyne: methylacetylene
isobutene: isobutylene 2_methylpropene | neopentane: neoC5 2_2_dimethylpropane
isohexane: iC6 2_methylpentane | benzene: C6H6 | undecane: n_undecane C11 nC11
dodecane: n_dodecane C12 nC12 | methanol: CH3OH | ethanol: C2H5OH | dimethyl_ether: DME
vinyl_chloride: VCM | sulfur_dioxide: SO2 sulphur_dioxide | carbonyl_sulfide: COS carbonyl_sulphide
nitrous_oxide: N2O | hydrogen_chloride: HCl | chlorine: Cl2 | fluorine: F2 | neon: Ne | krypton: Kr
xenon: Xe | sulfur_hexafluoride: SF6 sulphur_hexafluoride | deuterium: D2
r1234ze_e: R1234ze | r40: methyl_chloride chloromethane
"""

# Dry air in mole fractions, rarer gases (below 0.003 % together) left out. SOURCE: A. Picard, R. S.
# Davis, M. Glaser and K. Fujii, Metrologia 45 (2008) 149-155 (formula CIPM-2007), table of the
# composition of dry air; quoted from memory. Normalised where it is used.
DRY_AIR = {"nitrogen": 0.780848, "oxygen": 0.209390, "argon": 0.009332, "carbon_dioxide": 0.0004}

# Electric dipole moments in debye, for the viscosity estimate only; zero where not named.
# SOURCE: B. E. Poling, J. M. Prausnitz and J. P. O'Connell, *The Properties of Gases and Liquids*,
# 5th edition, appendix A; quoted from memory.
DIPOLE_MOMENT = {
    "water": 1.85,
    "ammonia": 1.47,
    "hydrogen_sulfide": 0.98,
    "carbon_monoxide": 0.11,
    "sulfur_dioxide": 1.63,
    "hydrogen_chloride": 1.11,
    "methanol": 1.70,
    "ethanol": 1.69,
}


class Component(NamedTuple):
    """Constants of one component; SI."""

    name: str
    molar_mass: float  # kg/mol
    critical_temperature: float  # K
    critical_pressure: float  # Pa
    critical_volume: float  # m3/mol
    acentric_factor: float  # -
    coolprop_name: str


def _table(rows: str) -> dict[str, Component]:
    table = {}
    for row in rows.strip().splitlines():
        name, mass, temperature, pressure, volume, acentric, coolprop = row.split()
        table[name] = Component(
            name,
            float(mass) * 1e-3,
            float(temperature),
            float(pressure) * 1e5,
            float(volume) * 1e-6,
            float(acentric),
            coolprop,
        )
    return table


def plain(name: str) -> str:
    """Return a name without case, blanks, hyphens, underscores, commas and brackets."""
    return "".join(letter for letter in name.casefold() if letter.isalnum())


def _spellings() -> dict[str, str]:
    known = {plain(name): name for name in COMPONENTS}
    for entry in _SPELLINGS.replace("\n", "|").split("|"):
        name, _, others = entry.partition(":")
        known.update({plain(other): name.strip() for other in others.split()})
    return known


GERG_COMPONENTS = _table(_GERG_ROWS)
COMPONENTS = GERG_COMPONENTS | _table(_OTHER_ROWS)
SPELLINGS = _spellings()
