/*
Package ingest reads the files of a test floor into lots.

A [Lot] is one lot of wafers in columns: a row a die, sorted by wafer and order
of test, a column a test. [Read] makes lots of files, [Build] of a [Table] that
is in memory already; both clean the data in the same way and say in
[Lot.Findings] what they did. Nothing is dropped in silence: [Tally] accounts for
every row.

Its rule on bad data: what stands in the way of reading is an [Error] of one
line, with file, line and remedy; everything else is read as far as nothing
false is used, and a finding counts it.

# Delimited text

A table has a header row and rows of data. Two shapes are read. Wide, a row a
die and a column a test:

	LOT,WAFER,DIE_X,DIE_Y,HBIN,BVCBO,ICBO
	unit,,,,,V,nA
	lower,,,,,35,
	upper,,,,,,5
	A7.1,01,3,-4,1,41.937,1.24
	A7.1,01,4,-4,5,12.110,873

Long, a row a die and test:

	LOT;WAFER;DIE_X;DIE_Y;TEST;VALUE;UNIT;LOWER;UPPER
	A7.1;01;3;-4;BVCBO;41,937;V;35;
	A7.1;01;3;-4;ICBO;1,24;nA;;5

A file is long when it has a column of test names and one of values. In both
shapes:

  - Fields are separated by comma, semicolon, tab or bar; which one is found
    from header and first rows. A decimal comma is found too, when the separator
    is none, or the numbers are quoted. Quotes are those of RFC 4180, so that a
    quoted field may hold separators and line ends. Blanks around a field do not
    count.
  - Lines that start with # are comments; "# lot: A7.1" above the table becomes
    an attribute of the lot, and gives lot, wafer or product where no column
    does. Lines of one or two fields above the header are read in the same way.
    Without any lot, the lot is named after the file.
  - Text is UTF-8, with or without byte-order mark; what is no UTF-8 is read as
    Windows-1252. UTF-16 is refused. Files may be packed with gzip or zstd,
    which is told by content and not by name.
  - Several files are read one after the other, as if they were one; see below.

# Other formats

A format is told by content first and by name second. Each gives the same columns
to the same cleaning, so that a lot is the same Lot in any of them.

  - STDF V4 (package stdf), both byte orders. The lot is that of the MIR, its other
    fields become attributes; a part is a row, touchdowns are counted from which
    parts were open at once, PTR and MPR results are tests named by their text, and
    #number behind it where several tests share a text. Results are float32 in the
    base unit; a value is the shortest decimal of its float32, so that 4.2 nA is
    4.2 nA. Results flagged as invalid are missing and counted. FTR results are left
    out. Damage is a finding with its byte; whole parts are kept.
  - Parquet and Arrow IPC, file and stream. What [WriteParquet] and [WriteArrow]
    wrote is read back as the same Lot, values to the last bit; columns of other
    programs' files are found by name, as in text. Lists and structures are not
    read. The whole batches of a stream that was cut are kept.
  - xlsx, the first sheet, as if it were text; see the function workbook.
  - zip archives of any of these, but not of archives.

What a file of a few bytes can make of memory is bounded: a packed one by 200 times
its size, or 256 MB.

# Several files

A path may be a file, a folder, a pattern or a zip archive. Files in these three
are read in natural order of their names; those whose names and contents are of no
kind that is read are skipped, and a finding names them. Folders in a folder are
not read.

  - A file without lot id is of the lot of the others, when that is one. Files of
    one folder, pattern or archive, none of which names a lot, are one lot, named
    after it. Any other file is a lot named after itself.
  - A file in a folder, pattern or archive that names no wafer is the wafer in its
    name: W07 or wafer-7, else the whole name.
  - Different lot ids are different lots.
  - The same die in two files is a retest; the later file is that which started
    later, where all files say so (STDF), else that which is named later.
  - What the files say differently of the lot becomes an attribute of wafers or
    dice.
  - One that cannot be read is an error, however many others there are, unless
    [Options].SkipBad says that it is a finding.

# Columns

Names are compared as letters and digits only, without case: "Die X", DIE_X and
die.x are one. The product file's columns block comes first; the other roles are
found by the usual names:

	lot            lot, lot id, batch ...
	wafer          wafer, wafer id, wafer no, slice ...   (needed, or a comment)
	x, y           x, die x, x coord, col ...; whole numbers, the die's index
	site           site, site no, dut ...
	touchdown      touchdown, sequence, test order, index ...
	hard_bin       hbin, hard bin, bin ...; soft_bin: sbin, soft bin ...
	pass           pass/fail, passed, status, result ...: P/F, PASS/FAIL, 1/0 ...
	part           part id, die id, serial ...
	time           test time, timestamp, date ...
	test, value    test name, parameter ...; value, reading, result ...
	unit           unit, units ...
	lower, upper   lower, lsl, low limit, min ...; upper, usl, high limit, max ...

Of what is left, columns of numbers are tests, and columns of text are
attributes: of the lot when they never differ in it, else of the wafer when they
never differ within one, else of the die. So are columns of whole numbers that
never differ within a wafer and that neither product file, unit nor limits make
a test, and those with a name that no test has (temperature, probe card).

A unit may stand in the header, "ICBO [nA]" or "ICBO (nA)", and so may the
conditions, "HFE1 (IC=10uA)". Rows of units, limits, test numbers and conditions
under the header are known by a word in any column (unit, lower, lsl, min, upper,
usl, max, test number, condition ...) or by their content: units only, or two
rows of numbers, with lot, wafer and coordinates empty.

# Values

Values are SI in the lot. The unit is that of the file; else the product file's;
else none. Where both have one and they do not convert into one another, the
product file's is used and the finding is severe. Limits are the file's unless
the product file gives its own.

Numbers are read as the nearest float64, as strconv.ParseFloat reads them. An
empty cell, a word for no reading (NA, null, -, ...), a word for out of range
(OVL, ...), an infinite number and text that is no number are missing, each
counted by itself.

# Cleaning

  - Measurements of the same die, by lot, wafer and coordinates, else by part id,
    are retests: the last valid one counts (see [Retest]); the others are in
    [Lot.Earlier]. Rows that repeat another in every field are duplicates. Rows
    of a die that have no test in common are parts of one measurement and joined.
  - Numbers that stand for no reading, as -9999 or 9.91e37, become missing.
  - Values at the tester's clamp are "at least", values at its floor "at most"
    ([Lot.Censor]); where the product file gives neither, a pile-up at the
    extreme value tells. A value below the product file's floor is set to the
    floor, for that is what it is at most.
  - Dice off the wafer, or without coordinates, stay in the lot and are counted.

How each is told is written at the functions of clean_*.go. A file that is cut
short keeps its whole rows; a last line that broke off is not used.

# How it is fast

One goroutine reads a file in blocks of whole lines, takes its hash and reserves
the rows of each block; others parse the blocks where their rows stay, rows of
plain cells by a fast path and all others by the full reader, with the same
result to the bit. The fast path tries each cell first by the way the one above
it is written, see shape. The columns are allocated once where the file's size
tells how long they get. What is in a block depends on the file alone, so that
the result does not depend on the number of goroutines; nor does it afterwards,
when tests and wafers are looked at in parallel.
*/
package ingest
