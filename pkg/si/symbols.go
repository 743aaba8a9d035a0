package si

// symbol is one unit that stands in the table by its own name.
type symbol struct {
	text string    // as parsed and, unless pretty is given, as printed
	dim  Dimension // of the coherent SI unit
	num  float64   // SI = num/den × 10^exp × value, all exact integers …
	den  float64
	exp  int
	real float64 // … or SI = real × value when the factor is irrational or measured
	off  string  // decimal added after scaling, "273.15" for °C
	pre  bool    // takes SI prefixes
	name string  // as people call it; says what the unit is in messages

	pretty string // for people, when it differs from text
	ucum   string // UCUM case-sensitive code, when it differs from text
	dsi    string // D-SI word without the backslash; "" when it has none
}

// symbols is every unit known by its own symbol. Sources: SI Brochure (9th
// edition, 2019) tables 2, 4 and 8 for SI units and those accepted with it; ISO
// 80000-4 for the bar; the rest common practice in the trade, no source, with
// the exact definitions of the international yard and pound (1959) for the
// inch and foot and of the CGS units by powers of ten.
var symbols = []symbol{
	{text: "1", num: 1, den: 1, name: "one", ucum: "1", dsi: "one"},
	{text: "m", dim: Length, num: 1, den: 1, pre: true, name: "metre", dsi: "metre"},
	{text: "g", dim: Mass, num: 1, den: 1, exp: -3, pre: true, name: "gram", dsi: "gram"},
	{text: "kg", dim: Mass, num: 1, den: 1, name: "kilogram", dsi: "kilogram"},
	{text: "s", dim: Time, num: 1, den: 1, pre: true, name: "second", dsi: "second"},
	{text: "A", dim: Current, num: 1, den: 1, pre: true, name: "ampere", dsi: "ampere"},
	{text: "K", dim: Temperature, num: 1, den: 1, pre: true, name: "kelvin", dsi: "kelvin"},
	{text: "mol", dim: Amount, num: 1, den: 1, pre: true, name: "mole", dsi: "mole"},
	{text: "cd", dim: Luminous, num: 1, den: 1, pre: true, name: "candela", dsi: "candela"},

	{text: "rad", num: 1, den: 1, pre: true, name: "radian", dsi: "radian"},
	{text: "sr", num: 1, den: 1, pre: true, name: "steradian", dsi: "steradian"},
	{text: "Hz", dim: Frequency, num: 1, den: 1, pre: true, name: "hertz", dsi: "hertz"},
	{text: "N", dim: Force, num: 1, den: 1, pre: true, name: "newton", dsi: "newton"},
	{text: "Pa", dim: Pressure, num: 1, den: 1, pre: true, name: "pascal", dsi: "pascal"},
	{text: "J", dim: Energy, num: 1, den: 1, pre: true, name: "joule", dsi: "joule"},
	{text: "W", dim: Power, num: 1, den: 1, pre: true, name: "watt", dsi: "watt"},
	{text: "C", dim: Charge, num: 1, den: 1, pre: true, name: "coulomb", dsi: "coulomb"},
	{text: "V", dim: Voltage, num: 1, den: 1, pre: true, name: "volt", dsi: "volt"},
	{text: "F", dim: Capacitance, num: 1, den: 1, pre: true, name: "farad", dsi: "farad"},
	{text: "Ω", dim: Resistance, num: 1, den: 1, pre: true, name: "ohm", ucum: "Ohm", dsi: "ohm"},
	{text: "S", dim: dim(-1, -2, 3, 2), num: 1, den: 1, pre: true, name: "siemens", dsi: "siemens"},
	{text: "Wb", dim: dim(1, 2, -2, -1), num: 1, den: 1, pre: true, name: "weber", dsi: "weber"},
	{text: "T", dim: FluxDensity, num: 1, den: 1, pre: true, name: "tesla", dsi: "tesla"},
	{text: "H", dim: Inductance, num: 1, den: 1, pre: true, name: "henry", dsi: "henry"},
	{text: "lm", dim: Luminous, num: 1, den: 1, pre: true, name: "lumen", dsi: "lumen"},
	{text: "lx", dim: Luminous.Div(Area), num: 1, den: 1, pre: true, name: "lux", dsi: "lux"},
	{text: "Bq", dim: Frequency, num: 1, den: 1, pre: true, name: "becquerel", dsi: "becquerel"},
	{text: "Gy", dim: dim(0, 2, -2, 0), num: 1, den: 1, pre: true, name: "gray", dsi: "gray"},
	{text: "Sv", dim: dim(0, 2, -2, 0), num: 1, den: 1, pre: true, name: "sievert", dsi: "sievert"},
	{text: "kat", dim: Amount.Div(Time), num: 1, den: 1, pre: true, name: "katal", dsi: "katal"},
	{text: "degC", dim: Temperature, num: 1, den: 1, off: "273.15", name: "degree Celsius", pretty: "°C", ucum: "Cel", dsi: "degreecelsius"},

	{text: "min", dim: Time, num: 60, den: 1, name: "minute", dsi: "minute"},
	{text: "h", dim: Time, num: 3600, den: 1, name: "hour", dsi: "hour"},
	{text: "d", dim: Time, num: 86400, den: 1, name: "day", dsi: "day"},
	{text: "deg", real: degree, name: "degree of arc", pretty: "°", ucum: "deg", dsi: "degree"},
	{text: "arcmin", real: degree / 60, name: "minute of arc", pretty: "′", ucum: "'", dsi: "arcminute"},
	{text: "arcsec", real: degree / 3600, name: "second of arc", pretty: "″", ucum: "''", dsi: "arcsecond"},
	{text: "L", dim: Volume, num: 1, den: 1, exp: -3, pre: true, name: "litre", dsi: "litre"},
	{text: "t", dim: Mass, num: 1, den: 1, exp: 3, pre: true, name: "tonne", dsi: "tonne"},
	{text: "bar", dim: Pressure, num: 1, den: 1, exp: 5, pre: true, name: "bar", dsi: "bar"},
	{text: "eV", dim: Energy, num: 1602176634, den: 1, exp: -28, pre: true, name: "electronvolt", dsi: "electronvolt"},

	{text: "%", num: 1, den: 1, exp: -2, name: "per cent", dsi: "percent"},
	{text: "‰", num: 1, den: 1, exp: -3, name: "per mille", ucum: "[ppth]"},
	{text: "ppm", num: 1, den: 1, exp: -6, name: "parts per million", ucum: "[ppm]", dsi: "ppm"},
	{text: "ppb", num: 1, den: 1, exp: -9, name: "parts per thousand million", ucum: "[ppb]"},
	{text: "%RH", num: 1, den: 1, exp: -2, name: "per cent relative humidity", ucum: "%", dsi: "percent"},

	{text: "in", dim: Length, num: 254, den: 1, exp: -4, name: "inch", ucum: "[in_i]"},
	{text: "ft", dim: Length, num: 3048, den: 1, exp: -4, name: "foot", ucum: "[ft_i]"},
	{text: "atm", dim: Pressure, num: 101325, den: 1, name: "standard atmosphere", ucum: "atm"},
	{text: "Torr", dim: Pressure, num: 101325, den: 760, name: "torr"},
	{text: "mmHg", dim: Pressure, num: 133322387415, den: 1, exp: -9, name: "millimetre of mercury", ucum: "mm[Hg]"},
	{text: "dyn", dim: Force, num: 1, den: 1, exp: -5, pre: true, name: "dyne", ucum: "dyn"},
	{text: "erg", dim: Energy, num: 1, den: 1, exp: -7, pre: true, name: "erg", ucum: "erg"},
	{text: "Gal", dim: Acceleration, num: 1, den: 1, exp: -2, pre: true, name: "gal", ucum: "Gal"},
	{text: "statC", dim: Charge, num: 1, den: 2997924580, name: "electrostatic unit of charge"},
}

// degree is one degree of arc in radians, nearest double.
const degree = 0.017453292519943295769236907684886

// aliases are other ways to write a symbol of the table.
var aliases = map[string]string{
	"ohm": "Ω", "Ohm": "Ω", "\u2126": "Ω", // U+2126 is the ohm sign; the table has the Greek letter
	"°C": "degC", "℃": "degC", "Cel": "degC", "°": "deg", "′": "arcmin", "″": "arcsec",
	"l": "L", "percent": "%", "%rh": "%RH", "permil": "‰", "litre": "L", "Fr": "statC",
	"day": "d", "hour": "h", "degree": "deg",
}

// prefix is an SI prefix, SI Brochure (9th edition) table 7 with the four of
// CGPM 2022 resolution 3.
type prefix struct {
	text string
	exp  int
	dsi  string
}

var prefixes = []prefix{
	{"da", 1, "deca"}, {"h", 2, "hecto"}, {"k", 3, "kilo"}, {"M", 6, "mega"}, {"G", 9, "giga"},
	{"T", 12, "tera"}, {"P", 15, "peta"}, {"E", 18, "exa"}, {"Z", 21, "zetta"}, {"Y", 24, "yotta"},
	{"R", 27, "ronna"}, {"Q", 30, "quetta"},
	{"d", -1, "deci"}, {"c", -2, "centi"}, {"m", -3, "milli"}, {"µ", -6, "micro"}, {"n", -9, "nano"},
	{"p", -12, "pico"}, {"f", -15, "femto"}, {"a", -18, "atto"}, {"z", -21, "zepto"}, {"y", -24, "yocto"},
	{"r", -27, "ronto"}, {"q", -30, "quecto"},
}

// micros are the spellings of the prefix micro besides U+00B5: the Greek letter
// U+03BC and the ASCII u.
var micros = map[string]bool{"µ": true, "μ": true, "u": true}

// refused are symbols that people write and that must not be taken for
// something else, with what to write instead.
var refused = map[string]string{
	"gf":     gramForce,
	"mgf":    gramForce,
	"kgf":    gramForce,
	"kp":     gramForce,
	"degF":   "give the temperature in degC or K",
	"°F":     "give the temperature in degC or K",
	"mdegC":  "write mK: a difference of 1 degC is 1 K",
	"lb":     "give the mass in kg or g",
	"lbf":    "give the force in N",
	"psi":    "give the pressure in Pa, hPa or kPa",
	"mil":    "write in (1 mil = 0.001 in) or um",
	"micron": "write um",
	"cc":     "write cm^3 or mL",
	"sec":    "write s",
	"hr":     "write h",
	"hrs":    "write h",
	"amp":    "write A",
	"volt":   "write V",
	"volts":  "write V",
	"dB":     "give a plain ratio: a level in decibels is no unit",
}

const gramForce = "a gram-force depends on the gravity it was weighed in; give the mass in g (or mg) and the local gravity, or the force in mN (1 gf = 9.80665 mN only where gravity has its standard value)"

// index finds symbols by their text.
var index = func() map[string]int {
	m := make(map[string]int, len(symbols))
	for i, s := range symbols {
		m[s.text] = i
	}
	return m
}()
