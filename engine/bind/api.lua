-- SPDX-License-Identifier: GPL-3.0-or-later
-- The description of the api: what help "name" shows and the reference page is made from, and, in the
-- annotations, what an editor completes. A spec holds it against the bindings, both ways. Options of
-- verbs are not repeated here: they come from the engine's option tables. ASCII only.

---@meta linewright

---@class quantity a value with its standard uncertainty and unit
---@field value number
---@field u number standard uncertainty (k = 1)
---@field unit string
---@field kind "value"|"lower limit"|"upper limit"
---@field confidence number of a limit
---@field pull fun(self: quantity, other: quantity|number): number

---@class vector numbers that never change
---@field slice fun(self: vector, first: integer, last?: integer): vector
---@field map fun(self: vector, f: fun(x: number, i: integer): number): vector
---@field table fun(self: vector): number[]
---@field sum fun(self: vector): number
---@field mean fun(self: vector): number
---@field min fun(self: vector): number, integer
---@field max fun(self: vector): number, integer
---@field dot fun(self: vector, other: vector): number

---@class result named values that can be read but not changed
---@field table fun(self: result): table
---@field get fun(self: result, path: string): any
---@field names fun(self: result): string[]
---@field describe fun(self: result, name?: string): string?, string?
---@field figure fun(self: result, name?: string): figure

---@class radiation an emission spectrum
---@field name string
---@field wavelength_nm number
---@field k_beta_nm number
---@field is_plain boolean
---@field source string
---@field components table[]

---@class material a crystal
---@field name string
---@field title string
---@field formula string
---@field space_group string
---@field cell table<string, quantity>
---@field system string
---@field burgers_nm number
---@field density_kg_m3 number
---@field hazard string
---@field source string
---@field volume_nm3 number
---@field has_stiffness boolean
---@field reflections fun(self: material, range: scan|table): reflections
---@field young_modulus fun(self: material, h: integer, k: integer, l: integer): number

---@class standard a material with its certificate
---@field name string
---@field title string
---@field formula string
---@field space_group string
---@field cell table<string, quantity>
---@field system string
---@field burgers_nm number
---@field density_kg_m3 number
---@field hazard string
---@field source string
---@field volume_nm3 number
---@field has_stiffness boolean
---@field certificate string
---@field coverage_factor number
---@field temperature_c number
---@field domain_size_nm number
---@field unverified boolean
---@field material material
---@field reflections fun(self: standard, range: scan|table): reflections

---@class reflections the lines that a material may show
---@field select fun(self: reflections, f: fun(reflection: table): boolean): reflections

---@class scan intensity against 2theta
---@field two_theta vector
---@field intensity vector
---@field sigma vector?
---@field n integer
---@field file string
---@field header string
---@field hash string
---@field noise "counts"|"sigma"|"scaled"
---@field radiation radiation?
---@field crop fun(self: scan, low: number, high: number): scan
---@field at fun(self: scan, two_theta: number): number
---@field figure fun(self: scan): figure

---@class lines the fitted lines of a scan
---@field scan scan
---@field instrument calibration?
---@field n integer
---@field material material?
---@field radiation radiation
---@field fitted vector
---@field background vector
---@field variance vector
---@field figure fun(self: lines): figure
---@field table fun(self: lines): table

---@class calibration aberrations and profile of an instrument
---@field radiation radiation
---@field geometry string
---@field verdict string
---@field hash string
---@field valid_two_theta number[]
---@field record result
---@field fitted_lines lines?
---@field standard_used standard?
---@field save fun(self: calibration, path: string)
---@field profile_at fun(self: calibration, two_theta: number): table
---@field profile_curve fun(self: calibration, two_theta: number): table
---@field asymmetry_at fun(self: calibration, angles: table): table
---@field figure fun(self: calibration): figure
---@field table fun(self: calibration): table
---@field for_specimen fun(self: calibration, specimen: table): calibration
---@field compare fun(self: calibration, previous: calibration, options?: table): result

---@class profiles what the sample alone does to each line
---@field fitted_lines lines
---@field instrument calibration
---@field n integer
---@field method string
---@field source string
---@field coefficients fun(self: profiles, i: integer): table
---@field figure fun(self: profiles, name?: string): figure
---@field table fun(self: profiles): table

---@class figure
---@field name string
---@field title string
---@field caption string
---@field save fun(self: figure, path: string)

---@class report what a person reads

---@class recipe the running job; its inputs are fields
---@field path fun(self: recipe, name: string): string
---@field write fun(self: recipe, ...: any)
---@field write_csv fun(self: recipe, name: string, rows: any, columns?: string[]): string
---@field write_cif fun(self: recipe, name: string, lines: lines): string
---@field run fun(self: recipe, recipe: string, inputs: table)
---@field progress fun(self: recipe, what: string, fraction: number)
---@field check fun(self: recipe, passed: boolean, text?: string): boolean
---@field once fun(self: recipe, key: string, f: fun(): any): result
---@field each fun(self: recipe, items: table, key: function, f: function, options?: table): function
---@field run fun(self: recipe, recipe: string, inputs: table)

---@class linewright
---@field version string
---@field quantity fun(parts: table): quantity
---@field vector fun(numbers: table|vector): vector
---@field result fun(values: table): result
---@field radiation fun(name: string|number|table): radiation
---@field material fun(name: string|table): material
---@field standard fun(name: string|table): standard
---@field read_scan fun(path: string, options?: table): scan
---@field scan fun(columns: table): scan
---@field fit_lines fun(scan: scan, reflections: reflections|material|standard, options?: table): lines
---@field calibrate fun(lines: lines|table[], standard: standard|string|table, options?: table): calibration
---@field load_calibration fun(path: string): calibration
---@field history fun(calibrations: table[], options?: table): result
---@field response fun(lines: lines, standard: standard|string, options?: table): result
---@field dead_time fun(stronger: scan, weaker?: scan|table, options?: table): result
---@field deconvolve fun(lines: lines, options?: table): profiles
---@field separate fun(profiles: profiles, options?: table): result
---@field figure fun(parts: table): figure
---@field report fun(items: table): report
---@field recipe fun(declaration: table): recipe
---@field help fun(name?: any): string
---@field api fun(): table
---@field options fun(name: string): table[]

local function entry(call, purpose, parameters, returns, source)
  return { call = call, purpose = purpose, parameters = parameters, returns = returns, source = source }
end
-- one parameter: name, type, help, unit
local function p(name, type, help, unit)
  return { name = name, type = type, help = help, unit = unit }
end

local functions = {
  quantity = entry("lw.quantity { value, u, unit }",
    "A value with its standard uncertainty and unit; + - * / ^ propagate to first order, taking operands as "
      .. "independent (one object used twice is not).",
    { p("value", "number", "the value"), p("u", "number", "standard uncertainty, 0 if left out"),
      p("unit", "text", "for example nm, nm^-1, deg; none if left out") },
    "quantity", "JCGM 100:2008, 5.1.2"),
  vector = entry("lw.vector { numbers }", "Numbers in a row; + - * / ^ work element by element.",
    { p("numbers", "list", "numbers or quantities, whose values are taken") }, "vector"),
  result = entry("lw.result { name = value, ... }", "A result of your own, for records and reports.",
    { p("values", "table", "numbers, texts, flags, quantities, vectors, results, tables of these") }, "result"),
  radiation = entry("lw.radiation(name)", "The emission spectrum of the beam.",
    { p("name", "text", "a name (\"Cu Ka\"), a wavelength (\"0.05168 nm\"), a path, a number (nm), or a table") },
    "radiation"),
  material = entry("lw.material(name)", "A crystal: cell, space group, elastic constants.",
    { p("name", "text", "a name from standards/materials, a path, or a table") }, "material"),
  standard = entry("lw.standard(name)", "A certified reference material.",
    { p("name", "text", "a name or alias from standards/reference, a path, or a table") }, "standard"),
  read_scan = entry("lw.read_scan(path, { radiation = ... })",
    "Reads a scan: columns of text or powder CIF, gzipped or not.",
    { p("path", "text", "the file") }, "scan"),
  scan = entry("lw.scan { two_theta = v, intensity = v, ... }", "A scan from numbers.",
    { p("two_theta", "vector", "ascending", "deg"), p("intensity", "vector", "counts or scaled"),
      p("sigma", "vector", "standard uncertainty of each point; may be left out"),
      p("name", "text", "what messages call it") }, "scan"),
  fit_lines = entry("lw.fit_lines(scan, reflections, { ... })", "Fits all lines of a scan at once.",
    { p("scan", "scan", "with its radiation"),
      p("reflections", "reflections", "or a material or standard: all its reflections within the scan") },
    "lines"),
  calibrate = entry("lw.calibrate(lines, standard, { ... })",
    "Aberrations and profile of the instrument from the lines of a standard; or of several scans of standards on one "
      .. "state of it: lw.calibrate({ { lines, standard }, { lines, standard, attenuation =, positions_only = } }, "
      .. "{ ... }). What scans share is joined, displacement and transparency are each scan's own; aberrations, "
      .. "standard and lines of the record are the first scan's, scans has all.",
    { p("lines", "lines", "of the standard, fitted without an instrument; or the list of scans"),
      p("standard", "standard", "or its name; with a list of scans the options stand here") }, "calibration",
    "joined by generalised least squares: Aitken (1935) Proc. R. Soc. Edinburgh 55, 42; contradictions: Birge (1932) "
      .. "Phys. Rev. 40, 207"),
  load_calibration = entry("lw.load_calibration(path)", "Reads a calibration's record.",
    { p("path", "text", "calibration.json") }, "calibration"),
  history = entry("lw.history({ { calibration =, label =, after_service = }, ... }, { ... })",
    "Control charts of an instrument's calibrations in order of time: which point broke which rule.",
    { p("calibrations", "list", "tables: calibration, label (a date or a file), after_service (flag)") }, "result",
    "Shewhart (1931) Economic Control of Quality of Manufactured Product; ISO 7870-2"),
  response = entry("lw.response(lines, standard, { ... })",
    "Relative intensities of a standard against its certificate as a curve of the angle, flat or not.",
    { p("lines", "lines", "of the standard"),
      p("standard", "standard", "with certified intensities, or its name or file") },
    "result", "order of the curve: Hurvich & Tsai (1989) Biometrika 76, 297"),
  dead_time = entry("lw.dead_time(stronger, weaker, { ... })",
    "Dead time of the counter from two scans of one specimen at two currents, and the loss at the strongest point; or "
      .. "lw.dead_time(scan, { dead_time = 2e-6 }): the loss by a stated one.",
    { p("stronger", "scan", "counts"), p("weaker", "scan", "counts over the same angles") }, "result",
    "Knoll, Radiation Detection and Measurement (from memory)"),
  deconvolve = entry("lw.deconvolve(lines, { ... })",
    "Takes the instrument out of the lines, and refolds what it finds against the data.",
    { p("lines", "lines", "fitted with an instrument, which is used") }, "profiles"),
  separate = entry("lw.separate(profiles, { ... })",
    "Runs the methods that part size from strain, lays them side by side, and tells of which parts their uncertainties "
      .. "consist; on request it does the whole chain again for drawn counts.",
    { p("profiles", "profiles", "of lw.deconvolve") }, "result",
    "JCGM 100:2008; JCGM 101:2008; Kuensch (1989) Ann. Stat. 17, 1217"),
  figure = entry("lw.figure { title =, x =, y =, series = { ... } }", "A figure of your own.",
    { p("name", "text", "file name without suffix"), p("title", "text", "above it"),
      p("caption", "text", "below it in a report"),
      p("x, y, lower_y", "table", "axes: label, unit, log, low, high"),
      p("series", "list", "tables: kind (points, line, step, band, ticks), label, x, y, u_x, u_y, high, panel; "
        .. "quantities bring their error bars"),
      p("notes", "list", "tables: x, y, text, panel") }, "figure"),
  report = entry("lw.report { title =, items ... }", "A report in one HTML file; job:write writes it.",
    { p("title", "text", "the recipe's title if left out"), p("subtitle", "text", "may be left out"),
      p("items", "list", "texts, figures, objects of the road, { heading =, prefix = } (of its figures' files), "
        .. "{ caution =, title = }, { verdict = \"pass\", text = }, { table = rows, columns =, caption = }, "
        .. "{ brief = object } (what matters of it), { details = object } (the rest, folded)") }, "report"),
  recipe = entry("lw.recipe { title =, inputs = { ... } }",
    "Declares what a recipe wants, reads it from name=value arguments, and gives the job.",
    { p("title", "text", "what the recipe does"),
      p("inputs", "table", "by name: kind (file, name, text, number, list, folder, flag, glob: files or patterns), "
        .. "default (\"\" = may be left out, then false), help, unit, choices, least, most") }, "recipe"),
  help = entry("lw.help(name)", "What a function, method or noun does.",
    { p("name", "text", "as it is called, or an object; nothing: the list") }, "text"),
  api = entry("lw.api()", "This description as a table, for tools.", {}, "table"),
  options = entry("lw.options(name)", "The options of a function as a list of tables, for tools.",
    { p("name", "text", "of the function") }, "list of { key, kind, unit, default, help, choices }"),
}

local methods = {
  ["quantity:pull"] = entry("q:pull(other)", "Difference over combined standard uncertainty.",
    { p("other", "quantity", "or a number, taken as exact and in the same unit") }, "number"),
  ["vector:slice"] = entry("v:slice(first, last)", "A part, both ends included, negative from the end.",
    { p("first", "integer", "from 1"), p("last", "integer", "the end if left out") }, "vector"),
  ["vector:map"] = entry("v:map(f)", "What f(x, i) gives for each number.", { p("f", "function", "gives a number") },
    "vector"),
  ["vector:table"] = entry("v:table()", "The numbers as a Lua table.", {}, "list"),
  ["vector:sum"] = entry("v:sum()", "The sum, with compensation for rounding.", {}, "number",
    "Neumaier (1974) ZAMM 54, 39"),
  ["vector:mean"] = entry("v:mean()", "The arithmetic mean.", {}, "number"),
  ["vector:min"] = entry("v:min()", "The smallest number and its index.", {}, "number, integer"),
  ["vector:max"] = entry("v:max()", "The largest number and its index.", {}, "number, integer"),
  ["vector:dot"] = entry("v:dot(w)", "The sum of products.", { p("w", "vector", "of the same length") }, "number"),
  ["result:table"] = entry("r:table()", "A deep Lua table; quantities stay quantities.", {}, "table"),
  ["result:get"] = entry("r:get(path)", "The value at \"a.b.c\", or nil where nothing is.",
    { p("path", "text", "names parted by dots") }, "value or nil"),
  ["result:names"] = entry("r:names()", "The names in order.", {}, "list"),
  ["result:describe"] = entry("r:describe(name)", "What a value means, and its published source.",
    { p("name", "text", "of a field; the result itself if left out") }, "text or nil, text or nil"),
  ["result:figure"] = entry("r:figure(method)", "What there is to look at.",
    { p("method", "text", "of results of several methods: which one") }, "figure"),
  ["material:reflections"] = entry("m:reflections(scan)", "The reflections within a scan or a range.",
    { p("range", "scan", "or { low, high, radiation = ... }", "deg") }, "reflections"),
  ["material:young_modulus"] = entry("m:young_modulus(h, k, l)", "Young's modulus along the normal of hkl, GPa.",
    { p("h, k, l", "integers", "Miller indices") }, "number", "Nye (1957) Physical Properties of Crystals, ch. VIII"),
  ["standard:reflections"] = entry("s:reflections(scan)", "The reflections within a scan or a range.",
    { p("range", "scan", "or { low, high, radiation = ... }", "deg") }, "reflections"),
  ["reflections:select"] = entry("r:select(f)", "Those for which f(reflection) is true.",
    { p("f", "function", "gets { hkl, h, k, l, d_nm, two_theta_deg, multiplicity, families }") }, "reflections"),
  ["scan:crop"] = entry("s:crop(low, high)", "A new scan of the points between two angles.",
    { p("low", "number", "2theta", "deg"), p("high", "number", "2theta", "deg") }, "scan"),
  ["scan:at"] = entry("s:at(two_theta)", "Intensity by linear interpolation.",
    { p("two_theta", "number", "within the scan", "deg") }, "number"),
  ["scan:figure"] = entry("s:figure()", "Intensity against 2theta.", {}, "figure"),
  ["lines:figure"] = entry("l:figure()", "Measured and fitted curve, residuals in units of their u.", {}, "figure"),
  ["lines:table"] = entry("l:table()", "A deep Lua table of the fit.", {}, "table"),
  ["calibration:save"] = entry("c:save(path)", "Writes the record as JSON.",
    { p("path", "text", "job:path(name) in a recipe") }),
  ["calibration:profile_at"] = entry("c:profile_at(two_theta)",
    "The instrument's profile at one wavelength: fwhm, breadth, shift.",
    { p("two_theta", "number", "within the valid range", "deg") }, "table of quantities"),
  ["calibration:profile_curve"] = entry("c:profile_curve(two_theta)",
    "The instrument's profile at one wavelength as a curve: offset (deg) and density (deg^-1), out to 6 FWHM.",
    { p("two_theta", "number", "within the valid range", "deg") }, "table of vectors"),
  ["calibration:asymmetry_at"] = entry("c:asymmetry_at { angles }",
    "Centroid minus the middle at half height; negative where the tail goes to low angles.",
    { p("angles", "list", "within the valid range", "deg") }, "list of quantities"),
  ["calibration:figure"] = entry("c:figure()", "Width of the instrument against angle.", {}, "figure"),
  ["calibration:table"] = entry("c:table()", "A deep Lua table of the record.", {}, "table"),
  ["calibration:for_specimen"] = entry("c:for_specimen { attenuation =, thickness = }",
    "The same instrument, optical profile, with another specimen's transparency.",
    { p("attenuation", "number", "linear, of the specimen with its pores; 0 = not transparent", "mm^-1"),
      p("thickness", "number", "of the specimen, 0 = thick", "mm") }, "calibration"),
  ["calibration:compare"] = entry("c:compare(previous, { tolerances =, effects = })",
    "What changed since a calibration before, against tolerances, and what that would do to results.",
    { p("previous", "calibration", "of the same instrument, radiation and geometry"),
      p("tolerances", "table", "or the path of a Lua literal: zero_shift (deg), displacement (mm), flat_specimen "
        .. "(deg), transparency (deg), wavelength (relative), shift (deg), fwhm (%), breadth (%), asymmetry (deg), "
        .. "intensity (%)"),
      p("effects", "flag", "false leaves out what samples would be reported with the old calibration") }, "result"),
  ["profiles:coefficients"] = entry("p:coefficients(i)", "Fourier coefficients of one profile as vectors.",
    { p("i", "integer", "from 1") }, "table: length_nm, cosine, u_cosine, sine, u_sine, truncated_at"),
  ["profiles:figure"] = entry("p:figure(name)",
    "Fourier coefficients against column length, or instrument and profile put together against the data.",
    { p("name", "text", "\"coefficients\" (as without a name) or \"refold\"") }, "figure"),
  ["profiles:table"] = entry("p:table()", "A deep Lua table of the profiles.", {}, "table"),
  ["figure:save"] = entry("f:save(path)", "Draws it with gnuplot; .svg, .png or .pdf says how.",
    { p("path", "text", "job:path(name) in a recipe") }),
  ["recipe:path"] = entry("job:path(name)", "A path below the out folder; folders on the way are made.",
    { p("name", "text", "relative, without \"..\"") }, "text"),
  ["recipe:write"] = entry("job:write(results, report, ...)",
    "Writes each thing by its kind: results.json, calibration.json, report.html with figures/.",
    { p("things", "any", "a result or table, a calibration, a report, figures") }),
  ["recipe:write_csv"] = entry("job:write_csv(name, rows, columns)", "Rows as comma-separated values.",
    { p("name", "text", "below the out folder"), p("rows", "list", "of a result, lines, profiles, or tables"),
      p("columns", "list", "names, which and in what order; left out: all, those of tables by the alphabet") },
    "text"),
  ["recipe:write_cif"] = entry("job:write_cif(name, lines)",
    "Lines and the scan that they were fitted to as powder CIF: points, wavelengths, lines, cell.",
    { p("name", "text", "below the out folder"), p("lines", "lines", "from lw.fit_lines") }, "text"),
  ["recipe:check"] = entry("job:check(passed, text)", "A verdict: exit code 3 under strict=true if it failed.",
    { p("passed", "flag", "whether it holds"), p("text", "text", "what was judged") }, "flag"),
  ["recipe:progress"] = entry("job:progress(what, fraction)",
    "How far a long job has come: one bar with the time left on a terminal.",
    { p("what", "text", "what is done"), p("fraction", "number", "0 to 1, at the end 1") }),
  ["recipe:run"] = entry("job:run(recipe, inputs)",
    "Runs another recipe as a step of this one; it writes to a folder below this job's own.",
    { p("recipe", "text", "its path, from this recipe's folder"),
      p("inputs", "table", "name = value, and out = \"name\", the folder below out") }),
  ["recipe:each"] = entry("for place, item, result, message in job:each(items, key, f, { workers = 1 }) do",
    "Does once for each item of a list what job:once does, and gives it in the order of the list; an item whose f "
      .. "fails gives a message instead of a result. With several workers, items are shared out to processes of their "
      .. "own: f can't write, and what it leaves in variables is seen with one worker only.",
    { p("items", "list", "of anything, for example paths"),
      p("key", "function", "of an item: the key for job:once"),
      p("f", "function", "of an item: gives a result or a table, the same whatever was done before"),
      p("options", "table", "workers: 1 to 64, or \"auto\" for one a usable processor core") },
    "iterator"),
  ["recipe:once"] = entry("job:once(key, f)",
    "What f() gave when the key was first done: a long job that was stopped goes on where it was.",
    { p("key", "text", "names all that the step depends on besides the recipe, such as hashes"),
      p("f", "function", "gives a result or a table") }, "result"),
}

-- One field: type, help, unit.
local function f(type, help, unit)
  return { type = type, help = help, unit = unit }
end

local material_fields = {
  name = f("text", "by which it is found"), title = f("text", "as a person calls it"),
  formula = f("text", "chemical formula"), space_group = f("text", "short symbol"),
  cell = f("table", "a, b, c, alpha, beta, gamma as quantities", "nm, deg"), system = f("text", "crystal system"),
  burgers_nm = f("number", "length of the usual Burgers vector, 0 if not stated", "nm"),
  density_kg_m3 = f("number", "0 if not stated", "kg/m^3"), hazard = f("text", "caution for handling the powder"),
  source = f("text", "where the numbers are from"), volume_nm3 = f("number", "of the cell", "nm^3"),
  has_stiffness = f("flag", "elastic constants are known"),
}
local standard_fields = {
  certificate = f("text", "which"), coverage_factor = f("number", "k of the certificate"),
  temperature_c = f("number", "at which the cell is certified", "degC"),
  domain_size_nm = f("number", "stated mean column length, 0 = none", "nm"),
  unverified = f("flag", "compare its numbers with your own certificate"),
  material = f("material", "without the certificate"),
}
for name, field in pairs(material_fields) do
  standard_fields[name] = field
end

local nouns = {
  quantity = { purpose = "A value with its standard uncertainty (k = 1) and unit, or a limit.", fields = {
    value = f("number", "the value, or the limit"), u = f("number", "standard uncertainty, in the unit"),
    unit = f("text", "empty = none"), kind = f("text", "value, lower limit, upper limit"),
    confidence = f("number", "of a limit") } },
  vector = { purpose = "Numbers in a row that never change; v[i], #v and ipairs work.", fields = {} },
  result = { purpose = "Named values: r.name, r[i], #r, pairs and ipairs; print shows all.", fields = {} },
  radiation = { purpose = "An emission spectrum: Lorentzian components.", fields = {
    name = f("text", "as a person writes it"), wavelength_nm = f("number", "of the strongest component", "nm"),
    k_beta_nm = f("number", "0 if not known", "nm"), is_plain = f("flag", "one ideal line"),
    source = f("text", "where the numbers are from"),
    components = f("list", "tables: wavelength_nm, width_nm, weight") } },
  material = { purpose = "A crystal.", fields = material_fields },
  standard = { purpose = "A certified reference material.", fields = standard_fields },
  reflections = { purpose = "The lines that a material may show, ascending; r[i] and #r work.", fields = {} },
  scan = { purpose = "Intensity against 2theta; never changes.", fields = {
    two_theta = f("vector", "angles", "deg"), intensity = f("vector", "counts or scaled"),
    sigma = f("vector", "standard uncertainties, nil if the file has none"), n = f("integer", "points"),
    file = f("text", "as it was named"), header = f("text", "comment lines at the top"),
    hash = f("text", "SHA-256 of the file"), noise = f("text", "counts, sigma or scaled"),
    radiation = f("radiation", "nil if not known") } },
  lines = { purpose = "Fitted lines: l[i].two_theta, l[i].fwhm ..., l.fit.goodness_of_fit; #l.", fields = {
    scan = f("scan", "that was fitted"), instrument = f("calibration", "that was folded in, or nil"),
    n = f("integer", "lines"), material = f("material", "nil if there was none"),
    radiation = f("radiation", "of the scan"), fitted = f("vector", "model at the scan's points"),
    background = f("vector", "at the scan's points"), variance = f("vector", "of the model's counts") } },
  calibration = { purpose = "What the instrument does to a line at every angle; fields of its record too.", fields = {
    radiation = f("radiation", "for which it holds"), geometry = f("text", "reflection or capillary"),
    verdict = f("text", "pass, attention or fail"), hash = f("text", "SHA-256 of its record, empty before"),
    valid_two_theta = f("list", "low and high", "deg"), record = f("result", "all of it"),
    fitted_lines = f("lines", "nil if it was loaded"), standard_used = f("standard", "nil if it was loaded") } },
  profiles = { purpose = "The sample's own profiles: p[i].breadth_s ...; #p.", fields = {
    fitted_lines = f("lines", "they come from"), instrument = f("calibration", "that was taken out"),
    n = f("integer", "profiles"), method = f("text", "by which"), source = f("text", "of the method") } },
  figure = { purpose = "A figure; f:save \"name.svg\" draws it.", fields = {
    name = f("text", "file name without suffix"), title = f("text", "above it"), caption = f("text", "below it") } },
  report = { purpose = "A report; job:write writes it.", fields = {} },
  recipe = { purpose = "The running job: its inputs as fields, and the ways to write.", fields = {} },
}

return { functions = functions, methods = methods, nouns = nouns }
