// Package reader turns one source into measurements, run-sheet rows or
// documents. Read is the only way in; the formats are told apart by content,
// and any of them may lie in gzip, zstd or bzip2.
//
// # Invariants
//
//   - One pass, memory bounded by one wafer whatever the size of the source.
//     Reading, decompression and hashing run in a goroutine of their own, which
//     has ended when Read returns.
//   - Lossless: a decimal number becomes an integer at the finest decimal place
//     of its column and comes back as the float64 nearest to its text. A column
//     that an int32 cannot hold becomes float64. STDF results stay binary32.
//   - Bad input is an *analytics.Fault with its place and what to do now. A
//     measurement that was handed over before a fault is void: the caller stores
//     nothing of a source whose Read failed.
//
// # Epitally's own CSV
//
//	# epitally: die readings
//	# wafer: W-0001
//	# lot: L7
//	# kind: probe
//	# station: prober-1
//	# measured at: 2026-11-05T06:00:00+01:00
//	# drive current: 20 mA
//	# pitch: 0.4 x 0.4 mm
//	x,y,dominant_wavelength_nm,forward_voltage_v
//	-12,34,452.37,3.214
//	-11,34,,3.21
//
// The first line is fixed. Then come lines `# key: value`:
//
//   - wafer (unless a column names it), kind and measured at are required. Names
//     have 1 to 128 printable characters without / and \; a kind is written like a
//     quantity; the time is ISO 8601 with its zone.
//   - lot, station, drive current (with its unit).
//   - pitch (`0.4 x 0.5 mm`), diameter, edge exclusion (with their units), flat or
//     notch (right, up, left, down or degrees counter-clockwise from the right),
//     x axis (right, left), y axis (up, down), centre (`0.5, 0`, in die
//     coordinates): what the source knows of the layout.
//   - duplicates: refuse (default), first or last: what becomes of a die that
//     stands more than once.
//   - quantity: `name; label; unit; resolution` declares a quantity that is not
//     built in. It may stand more than once.
//   - any other key is kept as a fact, shown with the measurement.
//
// The header row names x, y, quantities and, when the file holds many wafers,
// wafer; the rows of one wafer follow one another. An empty field is no value;
// nan and inf are refused. Numbers have a decimal point and may have an exponent.
// Fields may be quoted as RFC 4180 has it, but a field ends on its line. Lines end
// in LF or CRLF; a byte order mark may stand first. A `#` line after rows begins
// the next measurement, which takes over what the file's first block states and
// this one does not state anew, and has a header row of its own. Files put one
// after another are a file.
//
// # Reading profiles
//
// A reading profile (YAML) explains delimited text, or names the tests of STDF:
//
//	profile: prober-3                 # its name
//	format: delimited                 # or stdf
//	match: ["P3_*.txt"]               # file-name globs, or {regexp: PATTERN}; .gz, .zst, .bz2 are passed over
//	file_name: '^P3_(?P<wafer>[^_]+)_'  # named groups give facts (below)
//	delimiter: ";"                    # one character, tab, or spaces (any number of them); default ","
//	decimal: ","                      # or "." (default)
//	encoding: utf-8                   # or latin-1, utf-16
//	header: {with: [ROW, COL]}        # the first line that holds these names, or {row: 7}, or none
//	skip: 1                           # lines between header row and first row; with header none, lines above the first row
//	stop: END                         # a line that begins so ends the rows
//	comment: "//"                     # lines that begin so are passed over
//	columns: {x: COL, y: ROW}         # names or numbers from 1; wafer: COLUMN when the file holds many
//	quantities:
//	  - {quantity: forward_voltage_v, column: "VF (mV)", unit: mV}      # the file's unit; converted exactly
//	  - {quantity: leakage_na, column: IL, unit: uA, store_unit: nA, label: Leakage, resolution: 0.01}  # declared
//	constants: {kind: probe, station: prober-3}
//	facts:                            # found above the header row
//	  lot: {label: LOT}               # the field after this one, or after "LOT:" in the same field; field: 2 = the one after that
//	  measured_at: {label: STARTED}
//	  drive_current: {label: CURRENT, unit: mA}   # unit: for a bare number
//	  operator: {line: 1, field: 2}   # by place; a name not known here is shown as it stands
//	time: {layouts: ["yyyy-MM-dd HH:mm"], zone: Europe/Berlin}  # yyyy yy MM MMM dd HH hh mm ss SSS tt zz
//	missing: ["---", "9999"]          # words that mean no value, besides an empty field
//	coordinates: {swap: true, negate: [x], offset: [0, 1]}      # in this order
//	duplicates: last                  # or first, refuse (default; last for STDF)
//
// Facts are wafer, lot, kind, station, measured_at, drive_current, pitch,
// diameter, edge_exclusion, flat, notch, x_axis, y_axis and centre, written like
// the keys of our own CSV, and any other name. Constants, file name and lines
// above the header row are asked in this order, the later over the earlier.
//
// For STDF a quantity has test: NUMBER, test_name: TEXT or both instead of a
// column; its unit may be left out, and is then the one the file states.
//
// # STDF V4
//
// Either byte order. Every WIR…WRR pair with dies is a measurement, kind probe
// unless the profile says otherwise, with lot and station from the MIR. Parts are
// told apart by head and site while they are open, and by X and Y afterwards: of
// a die that was tested again the last result counts. Without a profile every
// parametric test becomes a declared quantity named t<number>_<text>_<unit>;
// tester_pass (1 or 0), hard_bin, soft_bin and test_time_ms are always there when
// the file states them. Times are in the tester's zone: the profile's, else
// Input.Zone, with a notice.
//
// # Run sheets
//
//	# epitally: run sheet
//	wafer,lot,reactor,run,grown_at,carrier,ring,pocket,recipe,product
//	W-0001,L7,Heron,204,2026-11-01T06:00:00Z,C3,B,7,blue-455,tern-04
//
// wafer is required, the other columns may be left out or empty. A wafer stands
// once in a sheet.
//
// # Documents
//
// A YAML document whose first key is catalogue, specification or profile. A
// catalogue names products with their layouts, recipes with their targets, and
// quantities that are not built in:
//
//	catalogue: our-fab
//	products:
//	  - product: tern-04
//	    layout: {wafer_diameter_mm: 100, die_pitch_x_mm: 0.4, die_pitch_y_mm: 0.4, edge_exclusion_mm: 2, mark: flat, mark_angle_deg: 270}
//	recipes:
//	  - recipe: blue-455
//	    targets:
//	      - {quantity: dominant_wavelength_nm, value: 455, window: 2.5}
//	quantities:
//	  - {name: leakage_na, label: Leakage, unit: nA, resolution: 0.01}
package reader
