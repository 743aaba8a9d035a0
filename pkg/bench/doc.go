// Package bench reads and checks what a laboratory writes down: bench files with
// their readings, and budget files. It also writes a bench file to start from.
//
// A dataset is a folder with bench.toml and the CSV files it names. Open returns
// it as a Bench: readings and quantities in SI, units beside them, every input
// hashed in the same read that parsed it. Nothing is returned that has not been
// checked against the description of its kind (package model): channels and
// their units, quantities and their dimensions, corrections, options.
//
// # Errors
//
// Every error is an *Error (or several joined, in the order of the file) that
// names the file, the line and column, and the key or the column of the CSV, and
// says what would be right:
//
//	bench.toml:15:8: channels.voltage.unit: "mm" is a length; a voltage is due (for example kV)
//	readings.csv:17: column F/mN: "1.2e" is not a number
//
// Unknown keys are errors, with the nearest known key or the table that the key
// belongs to. What is doubtful but not wrong is a warning in Bench.Warnings.
//
// # Values
//
// A quantity is a text with its unit, "50.012 mm"; pure numbers may stand alone.
// What is known of it goes into a table: { value = "50.012 mm", u = "1.5 um" }.
// A standard uncertainty of zero is refused: leave u out for an exact value.
// Uncertainties in degC are read as K. Distributions are those of JCGM 101:2008
// table 1 and the curvilinear trapezoid. A quantity that the fit always finds
// takes no u, only a start; one with adjust = true has its value and u as prior
// knowledge.
//
// # Errors of the readings
//
// Four kinds, which are never mixed: noise (independent from row to row),
// resolution (its width over the square root of 12, GUM F.2.2.1, with each
// reading or with each setting), grouped effects (one error for all rows with the
// same word in a row column) and the shared gain and offset (one for all rows):
// true value = gain × reading + offset.
//
// # Instruments
//
// What an instrument may have moved by since its calibration is one error that all
// its values share: the readings of the channels and the quantities that name it
// (instrument = "caliper"), so that a radius and a spacing from one caliper move
// together. Two keys of its table state limits either way. drift_per_year is
// multiplied by the years from calibrated to that day of the work ([work] performed
// to finished, else the time stamps of the readings) which lies farthest from it.
// per_kelvin is multiplied by √(t² + u(T)² + u(T₀)²), t being the difference of the
// temperatures T of the work and T₀ of the calibration: the product of two unknowns
// then has its variance. Both are rectangular about zero (JCGM 100:2008 4.3.7) and
// enter budgets as instruments.NAME.drift and instruments.NAME.temperature. A limit
// that is a pure number ("0.002 %", "12 ppm/K") multiplies every value by 1 + error
// as a gain does; one in the unit of the values ("2 um", "0.5 um/K") adds to them as
// an offset does, behind the correction of the zero. Where a date or a temperature is
// missing the bench is refused, since zero would be wrong.
//
// # Readings files
//
// CSV after RFC 4180 in UTF-8, with or without byte order mark. The first record
// is the header; columns are named by it, exactly as it stands. Cells are
// separated by comma, semicolon or tab, found from the header. Blank lines are
// skipped. A number is decimal, [+-]digits[.digits][e[+-]digits]; it is the double
// nearest to its text, the bits that strconv.ParseFloat gives, and is then
// converted to SI by one operation. A missing value is an empty cell or one of the
// words in missing; a reading without a value is left out with that reason, and a
// warning says how many. Excluded rows stay in the Bench, marked, with their
// reason. Data records are counted from 1 over all files in messages and in
// [[exclude]], from 0 in slices.
//
// Limits, so that a hostile file costs little: 1 MiB for bench.toml and for one
// record of a CSV file, 4 GiB for a file, 4096 columns, 20 000 000 records, 1000
// files. Files must lie in the folder of the bench: no absolute path, no .., no
// link that leads out, no device.
//
// The kinds of row are reading, zero (the cause removed), blank (the whole cycle
// without the effect) and overrange (a value that the instrument could not show).
//
// # Keys of a bench file
//
//	the bench
//	  format               version of the file's format; 1
//	  title                what the bench is, in one line
//	  model                kind of bench
//	  method               least-squares (default) or errors-in-variables
//
//	[[readings]] a file of readings; several are appended in this order
//	  file                 CSV file in the folder of the bench, slashes forward
//	  sha256               pin: the file must have this SHA-256
//	  separator            comma, semicolon or tab; found from the header when not stated
//	  decimal              point (default) or comma
//	  missing              words that mean a missing value, besides an empty cell
//
//	[rows] columns that say what a row is
//	  time                 time of the reading: RFC 3339 or seconds
//	  kind                 reading, zero, blank or overrange; without this column all are readings
//	  setting              rows with the same word share one setting
//	  polarity             polarity of the voltage
//	  direction            up or down
//	  mount                rows with the same word share one mounting
//	  range                range of the instrument
//	  phase                as-found or as-left
//	  quality              quality mark
//	  quality_reject       quality marks that exclude a row
//
//	[channels.NAME] a column of readings
//	  column               header as it stands in the CSV
//	  unit                 unit of the column
//	  noise                standard uncertainty of one reading, independent from row to row;
//	                       "from-residuals" when unknown
//	  relative_noise       the same as a part of |reading|; adds in quadrature
//	  noise_dof            degrees of freedom of noise
//	  resolution           width of the last digit
//	  resolution_kind      reading (default) or setting: whether rounding is new with each reading or
//	                       with each setting
//	  gain                 quantity: true value = gain x reading + offset, for all rows
//	  offset               quantity, in the unit of the channel
//	  instrument           name of a table [instruments.NAME], which gives the readings
//	  grouped              errors that rows with the same word share
//
//	[[channels.NAME.grouped]] an error that rows with the same word in a row column share
//	  by                   one of the row columns: setting, polarity, direction, mount, range, phase,
//	                       quality
//	  u                    standard uncertainty
//	  relative_u           the same as a part of the reading
//	  dof                  degrees of freedom of u
//	  source               where u comes from
//
//	[quantities] quantities of the kind of bench
//
//	[[correlations]] correlation between two inputs
//	  between              two names: of quantities, channels.NAME.gain, channels.NAME.offset,
//	                       instruments.NAME.drift, instruments.NAME.temperature
//	  r                    correlation coefficient, -1 to 1
//
//	[corrections.NAME] a correction of the kind of bench, with its inputs
//	  use                  true or false
//
//	[environment] conditions: quantities, or columns of the readings
//	  temperature          of the air
//	  pressure             of the air
//	  humidity             relative humidity
//	  gravity              local acceleration of free fall
//
//	[instruments.NAME] an instrument: for traceability, and for what its values may have moved by
//	  description          what it is
//	  maker
//	  model
//	  serial
//	  firmware
//	  certificate          its calibration certificate
//	  issued_by            who calibrated it
//	  calibrated           date
//	  due                  date; used later, it is a deviation
//	  drift_per_year       greatest drift in a year, either way: a part of the values, or in their unit;
//	                       needs calibrated and [work] performed
//	  per_kelvin           greatest change with a kelvin, likewise; needs calibration_temperature and
//	                       environment.temperature
//	  calibration_temperature quantity: temperature at its calibration
//
//	[drive] how the voltage is applied
//	  kind                 balanced or one-side-earthed
//	  value                what the voltages are: dc, rms or peak
//	  frequency            quantity
//	  thd                  quantity: harmonic distortion, or ripple of dc
//	  waveform             in words
//
//	[mounting] how the item sits in the field
//	  kind                 free-body or flush
//	  reference_plane
//	  orientation
//	  sign_convention
//	  description
//
//	[spacing] how the distance between the electrodes was found
//	  points               measured distances
//	  centre               quantity: distance at the centre
//	  method
//	  instrument           name of a table [instruments.NAME]
//	  description
//
//	[capability] best capability of the laboratory: no smaller uncertainty is stated
//	  expanded             expanded uncertainty
//	  relative_expanded    the same as a part of the value
//	  k                    coverage factor; 2 when not stated
//	  lower                lower end of the range in which it holds
//	  upper                upper end
//	  scope
//	  source
//
//	[client] who asked for the work
//	  name
//	  address
//	  contact
//	  reference            the client's order
//
//	[item] what is calibrated
//	  description
//	  maker
//	  model
//	  serial
//	  identification       the client's own mark
//	  firmware
//	  condition            as received
//	  range
//	  accessories
//
//	[work] the job, for the certificate
//	  laboratory           name
//	  address              of the laboratory
//	  country              of the laboratory, two capitals as in ISO 3166-1
//	  place                where the work was done
//	  title                of the certificate
//	  certificate          its unique identification
//	  received             date
//	  performed            date, the first when there are several
//	  finished             last date of the work
//	  issued               date
//	  method               in words
//	  procedure            identification
//	  performed_by
//	  checked_by
//	  authorised_by
//	  function             of who authorised
//	  traceability         statement
//	  deviations           from the method, and instruments past their date
//	  remarks
//	  adjusted             whether the item was adjusted
//	  adjustment           what was done
//	  recalibration        date; printed only when agreed with the client
//	  agreed               true when the recalibration date is agreed with the client
//	  replaces             file of the certificate that this one amends
//	  reason               why it is amended
//
//	[limits] for a statement of conformity
//	  lower                number in unit, or a quantity
//	  upper                likewise
//	  unit                 of lower and upper
//	  measurand            which one; the first when not stated
//	  source               the specification
//	  rule                 simple, guard-band or non-binary
//	  guard                guard band: "U" (default), a multiple such as "0.83 U", or a quantity
//	  false_accept         guard band from this greatest risk of accepting falsely, instead of guard
//
//	[limits.population] what is known of such items before measuring, for global risks
//	  mean                 number in the unit of limits, or a quantity; the middle of the limits when
//	                       not stated
//	  sd                   standard deviation
//	  source
//
//	[safety] the laboratory's own limits; local codes and licensed practice prevail
//	  energy               greatest stored energy; 350 mJ when not stated
//	  charge               greatest stored charge; 50 uC when not stated
//	  source
//
//	[report] how results are stated
//	  coverage             coverage probability; 95.45 % when not stated
//	  digits               significant digits of u in the comparison of law and Monte Carlo; 1 when not
//	                       stated
//	  definition           definition of the factor, in words of the kind of bench
//
//	[[exclude]] a reading that is left out
//	  row                  data record, counted from 1 over all files
//	  reason               why; stands in every report
//
// # Keys of a quantity
//
//	a number with what is known of it; a text or a number alone is exact
//	  value                best estimate with its unit; a plain number has the unit one
//	  u                    standard uncertainty; degC is read as K
//	  relative_u           standard uncertainty as a part of |value|
//	  expanded             expanded uncertainty, with k or probability
//	  relative_expanded    expanded uncertainty as a part of |value|, with k or probability
//	  k                    coverage factor of expanded
//	  probability          coverage probability of expanded; with dof the factor is that of Student's t
//	  half_width           half of the width of a bounded distribution, with shape
//	  relative_half_width  half of the width as a part of |value|, with shape
//	  shape                rectangular, triangular, trapezoidal (with beta), curvilinear-trapezoid (with
//	                       inexactness) or arcsine, with half_width; exponential (value is the mean of a
//	                       quantity above 0) and gamma (value is a count), without u; t, with u and dof;
//	                       normal
//	  beta                 of a trapezoid: width of its top over that of its base
//	  inexactness          of a curvilinear trapezoid: half_width is known to plus or minus this
//	  dof                  degrees of freedom of u; infinite when not stated
//	  readings             repeated readings instead of value and u (Type A): mean, s/sqrt(n), n - 1
//	                       degrees of freedom
//	  adjust               true: estimated by the fit, with value and u as prior knowledge (without u:
//	                       freely)
//	  start                where the fit begins
//	  instrument           name of a table [instruments.NAME]
//	  source               where the value comes from
//
//	a quantity of [environment] taken from a column of the readings: its mean; u is combined with the scatter of the column
//	  column               header of the column in the readings
//	  unit                 unit of the column
//	  u                    standard uncertainty of the sensor, shared by all readings
//	  instrument           name of a table [instruments.NAME]
//	  source               where u comes from
//
// # Keys of a budget file
//
//	the budget
//	  format               version of the file's format; 1
//	  title                what the budget is for, in one line
//
//	[inputs.NAME] an input: the keys of a quantity, and these
//	  file                 CSV file in the folder of the budget that holds repeated readings (Type A)
//	  column               header of their column
//	  unit                 unit of the column, or of plain numbers in readings
//	  sha256               pin of the file
//	  decimal              point (default) or comma
//	  together             inputs with the same word were read together, reading by reading: their
//	                       correlation follows from the readings
//	  group                part of the bench, for grouping the budget
//
//	[outputs.NAME] an output
//	  formula              Go expression of the inputs
//	  unit                 of the result
//
//	[[correlations]] correlation between two inputs
//	  between              names of two inputs
//	  r                    correlation coefficient, -1 to 1
//
//	[instruments.NAME] an instrument, as in a bench file
//
//	[report] how results are stated
//	  coverage             coverage probability; 95.45 % when not stated
package bench
