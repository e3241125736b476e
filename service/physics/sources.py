"""The works that formulas come from, and the methods built of them."""

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final, Literal, TypeAlias

Status: TypeAlias = Literal["seen", "from memory"]


@dataclass(frozen=True, slots=True)
class Source:
    """A work that a formula, a constant or a value is taken from.

    Attributes
    ----------
    key : str
        Name by which docstrings cite it.
    title : str
        The work, in full.
    status : {"seen", "from memory"}
        Whether the passage was read for this project.
    """

    key: str
    title: str
    status: Status


@dataclass(frozen=True, slots=True)
class Method:
    """A method that results name.

    Attributes
    ----------
    slug : str
        Public key, never reused.
    letter : str
        Section of the methods paper.
    words : str
        What it does, in a sentence.
    formula : str
        The formula in plain text.
    source_keys : tuple of str
        The works it comes from.
    range : str
        Where it holds.
    bound : bool
        Whether it is a bound on the safe side and not a best estimate.
    """

    slug: str
    letter: str
    words: str
    formula: str
    source_keys: tuple[str, ...]
    range: str
    bound: bool


_SOURCES: Final = (
    Source(
        "gas-industry-guide",
        "British and European gas-industry guidance on oxygen deficiency and on cryogenic liquids "
        "in rooms",
        "from memory",
    ),
    Source(
        "laboratory-odh",
        "Fermilab, Environment, Safety and Health Manual, chapter on oxygen deficiency hazards "
        "(formerly 5064, now 4240); adopted by LBNL, Argonne (Physics Division cryogenic manual, "
        "appendix 3: 135 mmHg) and Jefferson Lab (manual 6540, appendix T4)",
        "from memory",
    ),
    Source(
        "osha-1910-146",
        "29 CFR 1910.146, Permit-required confined spaces: oxygen below 19.5 % (its "
        "upper mark, 23.5 %, from memory)",
        "seen",
    ),
    Source("iso-2533", "ISO 2533:1975, Standard Atmosphere", "from memory"),
    Source(
        "us-standard-atmosphere",
        "U.S. Standard Atmosphere, 1976, NOAA, NASA and USAF, Washington",
        "from memory",
    ),
    Source(
        "alduchov-eskridge",
        "O. A. Alduchov and R. E. Eskridge, Improved Magnus form approximation of saturation vapor "
        "pressure, Journal of Applied Meteorology 35 (1996)",
        "from memory",
    ),
    Source(
        "ideal-gas",
        "Equation of state of the ideal gas, and Dalton's law, with the molar gas constant of the "
        "SI (BIPM, 2019)",
        "from memory",
    ),
    Source(
        "property-library",
        "CoolProp 8.0.0, Helmholtz-energy reference equations of the pure fluids",
        "seen",
    ),
    Source(
        "span-wagner",
        "R. Span and W. Wagner, A new equation of state for carbon dioxide, Journal of Physical "
        "and Chemical Reference Data 25 (1996)",
        "from memory",
    ),
    Source(
        "dry-ice-packages",
        "FAA Advisory Circular 91-76A, and D. C. Caldwell et al., The sublimation rate of dry ice "
        "packaged in commonly used quantities by the air cargo industry, DOT/FAA/AM-06/19 (2006)",
        "from memory",
    ),
    Source(
        "le-chatelier",
        "H. Le Chatelier, Estimation of firedamp by flammability limits, Annales des Mines 19 "
        "(1891), as used by H. F. Coward and G. W. Jones, Limits of flammability of gases and "
        "vapors, U.S. Bureau of Mines Bulletin 503 (1952)",
        "from memory",
    ),
    Source(
        "nfpa-flammable",
        "NFPA practice of keeping flammable gas below a quarter of its lower limit (NFPA 69), and "
        "IEC 60079-20-1 for the limits",
        "from memory",
    ),
    Source(
        "exposure-limits",
        "29 CFR 1910.1000, NIOSH Pocket Guide to Chemical Hazards and EH40/2005 as amended: "
        "8-hour and 15-minute means of carbon dioxide and nitrous oxide",
        "from memory",
    ),
    Source(
        "nist-cryogenic-materials",
        "NIST, Cryogenic material properties: heat capacity of 304 stainless steel, integrated",
        "from memory",
    ),
    Source(
        "common-practice",
        "Common practice of the trade, which no source is known for",
        "from memory",
    ),
    Source(
        "carslaw-jaeger",
        "H. S. Carslaw and J. C. Jaeger, Conduction of heat in solids, 2nd edition, Oxford (1959)",
        "from memory",
    ),
    Source(
        "shaw-briscoe",
        "P. Shaw and F. Briscoe, Evaporation from spills of hazardous liquids on land and water, "
        "UKAEA Safety and Reliability Directorate, SRD R100 (1978)",
        "from memory",
    ),
    Source(
        "yellow-book",
        "TNO, Methods for the calculation of physical effects, CPR 14E (the Yellow Book)",
        "from memory",
    ),
    Source(
        "api-520",
        "API Standard 520, Sizing, selection and installation of pressure-relieving devices, part "
        "1, with annex C on flashing liquids",
        "from memory",
    ),
    Source(
        "iso-9300",
        "ISO 9300, Measurement of gas flow by means of critical flow nozzles",
        "from memory",
    ),
    Source(
        "lehmann-zahn",
        "W. Lehmann and G. Zahn, Safety aspects for LHe cryostats and LHe transport containers, "
        "ICEC 7 (1978), page 569",
        "from memory",
    ),
    Source(
        "iso-21013-3",
        "ISO 21013-3:2016, Cryogenic vessels, pressure-relief accessories, sizing and capacity "
        "determination",
        "from memory",
    ),
    Source(
        "churchill-chu",
        "S. W. Churchill and H. H. S. Chu, Correlating equations for laminar and turbulent free "
        "convection from a vertical plate, International Journal of Heat and Mass Transfer 18 "
        "(1975)",
        "from memory",
    ),
    Source(
        "nusselt-film",
        "W. Nusselt, Die Oberflächenkondensation des Wasserdampfes, Zeitschrift des VDI 60 (1916)",
        "from memory",
    ),
    Source(
        "brown-solvason",
        "W. G. Brown and K. R. Solvason, Natural convection through rectangular openings in "
        "partitions, International Journal of Heat and Mass Transfer 5 (1962); B. H. Shaw (1971, "
        "1976) and O. M. Lidwell, Journal of Hygiene 79 (1977), on air through open doors",
        "from memory",
    ),
    Source(
        "moler-van-loan",
        "C. Moler and C. Van Loan, Nineteen dubious ways to compute the exponential of a matrix, "
        "SIAM Review 20 (1978); uniformisation after A. Jensen (1953)",
        "from memory",
    ),
    Source(
        "chandrupatla",
        "T. R. Chandrupatla, A new hybrid quadratic/bisection algorithm for finding the zero of a "
        "nonlinear function without using derivatives, Advances in Engineering Software 28 (1997)",
        "from memory",
    ),
)

_METHODS: Final = (
    Method(
        "gas/ideal-at-site",
        "A3",
        "The gas that a liquid becomes, at the pressure of the site and the temperature of the "
        "room.",
        "V_g = V_l rho_l R T / (p M)",
        ("ideal-gas", "property-library"),
        "0 to 3000 m, 5 to 40 degrees Celsius: within 0.7 %, within 0.1 % for nitrogen, argon, "
        "oxygen, helium",
        False,
    ),
    Method(
        "ambient/standard-atmosphere",
        "B1",
        "The air pressure of a site from its elevation, where none is measured.",
        "p = p0 (1 - L h / T0)^(g M / (R* L))",
        ("iso-2533", "us-standard-atmosphere"),
        "-5000 to 11 000 m; weather moves it by 3 %",
        False,
    ),
    Method(
        "ambient/moist-air",
        "B2",
        "The oxygen fraction of humid air, shown to explain a meter and never used to judge.",
        "C = C0 (1 - RH p_ws / p), p_ws = 610.94 exp(17.625 t / (t + 243.04)) Pa",
        ("alduchov-eskridge", "ideal-gas"),
        "-40 to 50 degrees Celsius",
        False,
    ),
    Method(
        "marks/oxygen-by-pressure",
        "B4",
        "The oxygen fractions that count as dangerous and as critical at the height of a site.",
        "C_d = min(deficient, max(danger, danger_pressure / p)); "
        "C_c = min(C_d, max(critical, critical_pressure / p))",
        ("laboratory-odh", "osha-1910-146", "gas-industry-guide"),
        "any pressure",
        False,
    ),
    Method(
        "mixing/displacement",
        "C1",
        "A release at once first pushes out air, then mixes with what is left.",
        "C = C0 max(0, 1 - V_g / V)",
        ("gas-industry-guide",),
        "a closed room; the mean of the room, not its floor",
        True,
    ),
    Method(
        "mixing/while-displacing",
        "C2",
        "A release at once mixes as it comes, and the mixture leaves.",
        "C = C0 exp(-V_g / V)",
        ("laboratory-odh",),
        "a closed room; the mean of the room, not its floor",
        False,
    ),
    Method(
        "mixing/sealed",
        "C3",
        "A release at once mixes and nothing leaves.",
        "C = C0 / (1 + V_g / V)",
        ("ideal-gas",),
        "a sealed enclosure, for comparison only",
        False,
    ),
    Method(
        "ventilation/piecewise-constant",
        "D0, D6",
        "A release over time into a mixed room with supply and exhaust, solved exactly from one "
        "change of flow to the next.",
        "V dG/dt = D - W G, W = max(Q_s + R, Q_e), C = C0 (1 - G)",
        ("laboratory-odh",),
        "a well-mixed room whose make-up air comes from outdoors",
        False,
    ),
    Method(
        "ventilation/decaying-source",
        "D7, D8",
        "A release that dies away exponentially into a mixed room.",
        "R = R0 exp(-lambda t) in V dG/dt = R - W G",
        ("laboratory-odh",),
        "a well-mixed room with supply, exhaust or neither",
        False,
    ),
    Method(
        "ventilation/hold",
        "D",
        "The smallest flow that keeps the whole course of a release at a mark.",
        "steady: Q_s = D / G_t - R, Q_e = D / G_t; a finite release by the root of its highest G",
        ("laboratory-odh", "chandrupatla"),
        "a well-mixed room; no flow helps a release at once",
        False,
    ),
    Method(
        "ventilation/restore",
        "D4",
        "The flow that brings a room back to a mark within a time, and the time a flow needs.",
        "Q = V / t ln(G_0 / G_t)",
        ("laboratory-odh",),
        "a well-mixed room after the release",
        False,
    ),
    Method(
        "ventilation/mean",
        "E2",
        "The mean of a fraction over a time, exact under steady flows.",
        "mean G = G_s + (G_0 - G_s) (1 - exp(-n)) / n, n = W t / V",
        ("laboratory-odh",),
        "a well-mixed room",
        False,
    ),
    Method(
        "boil-off/normal-evaporation",
        "G1",
        "The gas a vessel gives off by itself.",
        "R = V_l rho_l / (86 400 s rho_g), V_l the liquid lost in a day",
        ("gas-industry-guide", "ideal-gas"),
        "the loss on the data plate, or a measured one",
        False,
    ),
    Method(
        "gas/real-gas",
        "A3",
        "The gas in a charged cylinder, whose density is not that of an ideal gas; where the "
        "cylinder holds liquid too, it is counted as full of it.",
        "m = V_c rho(p, T) by the reference equation; rho_l(T) where the pressure is that of "
        "saturation",
        ("property-library",),
        "to 50 MPa absolute, 220 to 400 K; the shipped fluids, others as ideal gas",
        False,
    ),
    Method(
        "dry-ice/share-per-hour",
        "G8",
        "The gas that dry ice gives off, in its box or emptied on a floor.",
        "R = f m / (3600 s rho_g), f the share that sublimes in an hour",
        ("dry-ice-packages", "ideal-gas", "common-practice"),
        "in a box or loose on a floor; not in water, and never at once",
        False,
    ),
    Method(
        "filling/transfer-loss",
        "G2",
        "The gas lost while vessels are filled: the share of the basis, or what flashes from the "
        "pressure of the source where that is more.",
        "R = f V_l' rho_l / rho_g for V_l / V_l', f = max(share, (h_l1 - h_l2) / (h_v2 - h_l2))",
        ("gas-industry-guide", "property-library"),
        "vessels filled in the room; all of it is counted from the critical pressure on",
        False,
    ),
    Method(
        "filling/overfill",
        "G2",
        "A vessel goes on filling at its full flow, and all that runs over evaporates at once.",
        "R = V_l' rho_l / rho_g until an independent high level closes, else until the source is "
        "empty",
        ("common-practice", "ideal-gas"),
        "automatic filling, or a person who leaves; a pool that a bund holds evaporates slower",
        True,
    ),
    Method(
        "layering/two-zone-bound",
        "F1",
        "All the gas stays in the zone that people breathe or, lighter than air, above it.",
        "C_zone = C0 max(0, 1 - V_g / V_zone), V_zone = A_f min(H, 1.5 m), or A_f (H - 1.5 m)",
        ("gas-industry-guide", "common-practice"),
        "any room; up to twenty times worse than a ventilated room is",
        True,
    ),
    Method(
        "flammable/le-chatelier",
        "E3",
        "Flammable gases together, as a share of the lower limit of their mixture.",
        "s = sum x_i / L_i",
        ("le-chatelier", "nfpa-flammable"),
        "gases that burn alike, such as hydrogen and methane, in air at room temperature",
        False,
    ),
    Method(
        "toxic/time-weighted-means",
        "E1, E2",
        "The highest mean of a toxic gas over 8 hours and over 15 minutes, exact on the segments, "
        "and its peak.",
        "max over t of the integral of X from t to t + w, divided by w; w = 8 h and 900 s",
        ("exposure-limits", "laboratory-odh"),
        "the mean of a well-mixed room; people near the source breathe more",
        False,
    ),
    Method(
        "detectors/first-order-response",
        "M1",
        "When a detector alarms: its reading follows the room with a lag of its own.",
        "tau dy/dt = C(t - t_d) - y, tau = T90 / ln 10",
        ("laboratory-odh",),
        "a detector that stands in the mean of the room",
        False,
    ),
    Method(
        "detectors/heights",
        "M4",
        "Whether a detector hangs where its gas goes, by the density of the gas as it arrives.",
        "cold heavy gas: 0.2 to 1.0 m; light gas: within 0.5 m of the ceiling; breathing height: "
        "0.9 to 1.6 m",
        ("common-practice", "property-library"),
        "rooms without strong draughts",
        False,
    ),
    Method(
        "detectors/zeroed-elsewhere",
        "M4",
        "What an oxygen cell reads in clean air that was zeroed at another pressure.",
        "y = C0 p / p_zero",
        ("ideal-gas",),
        "electrochemical cells, which give a current by partial pressure",
        False,
    ),
    Method(
        "egress/margin",
        "M2",
        "Whether people are out before the room is dangerous.",
        "margin = t_danger - (t_alarm + t_react + d / v)",
        ("laboratory-odh", "common-practice"),
        "people who are awake and can walk; danger by the mean of the room",
        False,
    ),
    Method(
        "records/due-dates",
        "N",
        "What is checked at intervals is overdue from the end of the day on which it fell due.",
        "due = done + interval, by the calendar of the site; overdue where due < now",
        ("common-practice",),
        "whatever has a date and an interval; without a date it counts as never done",
        False,
    ),
    Method(
        "records/present",
        "N",
        "Whether a record says what has to be known or has to be there.",
        "absent where nothing is recorded",
        ("common-practice",),
        "any record; what is absent does not count as a safeguard",
        False,
    ),
    Method(
        "records/assumed",
        "N",
        "What was assumed in place of a record, and whether another value would change the "
        "outcome.",
        "the case solved again with every assumed input at its mildest",
        ("common-practice",),
        "inputs with a cautious default in the basis",
        False,
    ),
    Method(
        "records/sound",
        "N",
        "Whether the records of a room can be computed with.",
        "every input within the range of its formula, and a number",
        ("common-practice",),
        "any room; one that cannot be computed never passes for safe",
        False,
    ),
    Method(
        "spill/pool-on-floor",
        "G5",
        "Liquid let go on a floor: a thin pool that the heat of the floor evaporates in seconds, "
        "so that all of it counts at once.",
        "A = V / 5 mm, at most the floor; t = pi a (m L / (2 A k dT))^2",
        ("shaw-briscoe", "yellow-book", "carslaw-jaeger"),
        "dry concrete at room temperature; wet or insulated floors are slower",
        True,
    ),
    Method(
        "overfill/bund",
        "G5",
        "Liquid that runs into a bund: by no time more gas than has run in, or than the floor "
        "inside of it can have evaporated.",
        "m(t) = min(f t, 2 A k dT / L sqrt(t / (pi a)))",
        ("carslaw-jaeger",),
        "a bund that is recorded, with its area, on dry concrete",
        True,
    ),
    Method(
        "line-break/liquid",
        "G6",
        "Liquid out of a line or hose that is broken right through, all of which evaporates.",
        "m = Cd A sqrt(2 rho (p1 - p2)), Cd = 1; at most what a restrictor lets through",
        ("api-520",),
        "subcooled liquid; saturated liquid flashes and flows less",
        True,
    ),
    Method(
        "line-break/gas",
        "G6",
        "Gas out of a line that is broken right through or left open.",
        "m = Cd A p1 sqrt(M / (R T)) f(gamma, p2 / p1), choked below the critical ratio; at most "
        "what a restrictor lets through",
        ("iso-9300", "api-520"),
        "gas at room temperature; the length of the line brings no credit",
        True,
    ),
    Method(
        "vacuum-loss/heat-flux",
        "G3",
        "What evaporates when the insulating vacuum of a vessel is lost.",
        "m = q A / L; q = 38 kW/m2 for helium, hydrogen and neon, 6 with multilayer insulation, "
        "2.8 for others and 6.9 with the jacket torn open; A = 1.3 (36 pi V^2)^(1/3) if unknown",
        ("lehmann-zahn", "churchill-chu", "nusselt-film"),
        "a large breach; the figures for nitrogen and what is warmer are a bracket that no "
        "standing measurement is known for",
        True,
    ),
    Method(
        "quench/mean-and-peak",
        "G7",
        "The helium of a magnet that quenches: its share into the room, at once.",
        "V = share rho_l V_l / rho_gas; mean rate V / t, peak twice as much",
        ("common-practice",),
        "all of the liquid; the share by the quench pipe as recorded, or its failure",
        True,
    ),
    Method(
        "layering/cold-cloud",
        "F4, F5",
        "How cold and how heavy a mixture of released gas and air is: fog ends where it is warm, "
        "not where its oxygen is safe. Told for reading; no finding rests on it.",
        "y M_g (h_g(T) - h_0) + (1 - y) M_a (h_a(T) - h_a(T_a)) = 0; rho = p M / (R T)",
        ("property-library", "ideal-gas"),
        "dry air at 101 325 Pa, above the dew point of air (81.7 K), without heat from walls",
        False,
    ),
    Method(
        "neighbours/network",
        "L1 to L4",
        "Gas that goes from room to room: by open doors and openings, by the air that a release "
        "pushes out, and by units that blow back the air of several rooms.",
        "V dG/dt = R + sum Q G - W G in every room, with steady flows in each segment; the state "
        "is carried over a segment by the exponential of one matrix; W balances what comes in",
        ("laboratory-odh", "moler-van-loan"),
        "well-mixed rooms, at most 12 of them and as many steps from the source as the basis says; "
        "what is pushed out of a room leaves by its open ways by their areas, as a bound",
        True,
    ),
    Method(
        "neighbours/door-exchange",
        "L5",
        "Air that passes an open doorway each way because one side is warmer.",
        "Q = Cd/3 W H^1.5 sqrt(g dT / T), Cd = 0.6; dT = 1 K where nothing is recorded",
        ("brown-solvason",),
        "an open doorway in still air; of no credit to the room of the release",
        True,
    ),
    Method(
        "records/plausible",
        "N",
        "Whether numbers that can stand in a record can hardly be, or speak of wear.",
        "one recorded number against another, or against what is met in practice",
        ("common-practice",),
        "numbers that a formula would take; they are computed with as they stand",
        False,
    ),
    Method(
        "severity/table",
        "N",
        "How bad a case is: the worst mark it crosses against the safeguards that hold.",
        "severity = table[worst mark, none or some or all of the safeguards], one step lower where "
        "the release counts so",
        ("common-practice",),
        "every case that counts towards the standing",
        False,
    ),
)

SOURCES: Final[Mapping[str, Source]] = MappingProxyType({each.key: each for each in _SOURCES})
METHODS: Final[Mapping[str, Method]] = MappingProxyType({each.slug: each for each in _METHODS})
