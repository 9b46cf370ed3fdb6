// CSV: RFC 4180 for what a line is, Python's csv module for reading it back.
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "base/text.h"
#include "query/encode/encoding.h"
#include "support/result_samples.h"

namespace bentlight::query {
namespace {

using test::python;

// Prints the rows of each table, as a reader who skips the lines with '#' finds them.
constexpr const char* print_tables =
    "import sys, csv, io\n"
    "text = open(sys.argv[1], newline='', encoding='utf-8').read()\n"
    "lines = [l for l in text.split('\\r\\n') if not l.startswith('#')]\n"
    "for table in '\\r\\n'.join(lines).strip('\\r\\n').split('\\r\\n\\r\\n'):\n"
    "    print(list(csv.reader(io.StringIO(table, newline=''), strict=True)))\n";

std::string without_comments(std::string text) {
  std::string out;
  for (const std::string& line : split(text, '\n')) {
    if (!line.starts_with('#')) out += line + "\n";
  }
  out.pop_back();
  return out;
}

TEST(EncodeCsv, PutsArraysOfOneAxisSideBySide) {
  EXPECT_EQ(encode_csv(test::small_result(), "").value(),
            "# analysis = statistics; subject = wall-dome-az90; digest = 0123abcd\r\n"
            "# opd_rms_mean = 0.25 um [0.2; 0.3] at 0.95\r\n"
            "# frames = 3 1\r\n"
            "# warning short-window: 3 frames; 'few'\r\n"
            "# rms_map of 3 x 2 [um] is left out here: ask for it by array=rms_map\r\n"
            "time [s],mean [um]\r\n0,0.1\r\n0.5,-2\r\n1,3e-07\r\n"
            "\r\n"
            "x [m]\r\n-0.05\r\n0.05\r\n"
            "\r\n"
            "y [m]\r\n-0.1\r\n0\r\n0.1\r\n");
}

TEST(EncodeCsv, PutsAnAxisFirstWhereverItStands) {
  Result result = test::small_result();
  std::swap(result.arrays[0], result.arrays[1]);

  EXPECT_THAT(encode_csv(result, "").value(), testing::HasSubstr("\r\ntime [s],mean [um]\r\n0,0.1\r\n"));
}

TEST(EncodeCsv, TakesArraysWhoseAxisIsOnlyAName) {
  Result result;
  for (const char* name : {"azimuth", "elevation"}) {
    result.arrays.push_back(test::array_of(name, {2}, {"deg"}, {"view"}, std::vector{1.0, 2.0}));
  }

  EXPECT_EQ(without_comments(encode_csv(result, "").value()),
            "azimuth [deg],elevation [deg]\r\n1,1\r\n2,2\r\n");
}

TEST(EncodeCsv, ArrayChoosesOneTable) {
  EXPECT_EQ(without_comments(encode_csv(test::small_result(), "mean").value()),
            "time [s],mean [um]\r\n0,0.1\r\n0.5,-2\r\n1,3e-07\r\n");
  EXPECT_EQ(without_comments(encode_csv(test::small_result(), "x").value()), "x [m]\r\n-0.05\r\n0.05\r\n");
}

TEST(EncodeCsv, AMatrixHasItsAxesAlongItsEdges) {
  const std::string text = encode_csv(test::small_result(), "rms_map").value();

  EXPECT_THAT(text, testing::HasSubstr("# rms_map [um]: the first row holds x [m]\r\n"));
  EXPECT_EQ(without_comments(text), "y [m],-0.05,0.05\r\n-0.1,0.1,0.2\r\n0,0.3,0.4\r\n0.1,0.5,0.6\r\n");
}

TEST(EncodeCsv, MoreDimensionsHaveMoreLeadingCells) {
  Result result;
  std::vector<double> data(12);
  for (std::size_t i = 0; i < data.size(); ++i) data[i] = static_cast<double>(i);
  result.arrays.push_back(test::array_of("lag", {2}, {"s"}, {"lag"}, std::vector{0.5, 1.5}));
  result.arrays.push_back(test::array_of("average", {2, 3, 2}, {"um", 1}, {"lag", "y", "x"}, data));

  EXPECT_EQ(without_comments(encode_csv(result, "average").value()),
            "lag [s],y,0,1\r\n"
            "0.5,0,0,1\r\n0.5,1,2,3\r\n0.5,2,4,5\r\n"
            "1.5,0,6,7\r\n1.5,1,8,9\r\n1.5,2,10,11\r\n");
}

TEST(EncodeCsv, NumbersThatAreNotFiniteAreEmptyCells) {
  const double nan = std::nan(""), infinity = std::numeric_limits<double>::infinity();
  Result result;
  result.arrays.push_back(test::array_of("t", {3}, {"s"}, {"t"}, std::vector{0.0, nan, 2.0}));
  result.arrays.push_back(test::array_of("a", {3}, {"1"}, {"t"}, std::vector{nan, infinity, 1.0}));

  EXPECT_EQ(without_comments(encode_csv(result, "").value()), "t [s],a [1]\r\n0,\r\n,\r\n2,1\r\n");
}

// A lone empty cell would be an empty line, which ends a table.
TEST(EncodeCsv, AnEmptyCellAloneInItsRowIsQuoted) {
  Result result;
  result.arrays.push_back(test::array_of("a", {2}, {"1"}, {}, std::vector{std::nanf(""), 1.0F}));

  EXPECT_EQ(python(print_tables, encode_csv(result, "").value()), "[['a [1]'], [''], ['1']]\n");
}

// RFC 4180, section 2, rules 6 and 7: fields with double quotes and commas are enclosed in double quotes, and
// a double quote inside is doubled; its example is "aaa","b""bb","ccc". Line breaks it allows too, but a name
// has none.
TEST(EncodeCsv, QuotesFieldsAsTheRfcDoes) {
  Result result;
  for (const char* name : {"#aa", "b\"bb", "c,c", "d\n#d"}) {
    result.arrays.push_back(test::array_of(name, {1}, {"1"}, {"i"}, std::vector{1.0}));
  }
  const std::string text = encode_csv(result, "").value();

  EXPECT_THAT(text,
              testing::HasSubstr("\r\n\"#aa [1]\",\"b\"\"bb [1]\",\"c,c [1]\",d #d [1]\r\n1,1,1,1\r\n"));
  EXPECT_EQ(python(print_tables, text),
            "[['#aa [1]', 'b\"bb [1]', 'c,c [1]', 'd #d [1]'], ['1', '1', '1', '1']]\n");
}

TEST(EncodeCsv, TextThatASpreadsheetWouldRunIsDisarmedAndNumbersAreNot) {
  Result result;
  for (const char* name : {"=1+1", "+a", "-a", "@a"}) {
    result.arrays.push_back(test::array_of(name, {1}, {"1"}, {"i"}, std::vector{-1.5}));
  }
  result.subject = "a,=cmd()\r\n=cmd()";
  const std::string text = encode_csv(result, "").value();

  EXPECT_EQ(without_comments(text), "'=1+1 [1],'+a [1],'-a [1],'@a [1]\r\n-1.5,-1.5,-1.5,-1.5\r\n");
  EXPECT_THAT(text, testing::StartsWith("# analysis = ; subject = a;=cmd()  =cmd()\r\n"));
}

TEST(EncodeCsv, EmptyAndScalarArraysHaveTheirPlace) {
  Result result;
  result.arrays.push_back(test::array_of("none", {0}, {"m"}, {}, std::vector<double>()));
  result.arrays.push_back(test::array_of("one", {}, {"m"}, {}, std::vector{2.5}));
  result.arrays.push_back(test::array_of("flat", {3, 0}, {"m"}, {}, std::vector<double>()));

  const std::string text = encode_csv(result, "").value();

  EXPECT_THAT(text, testing::HasSubstr("# one = 2.5 m\r\n"));
  EXPECT_EQ(without_comments(text), "none [m]\r\n");
  EXPECT_EQ(without_comments(encode_csv(result, "one").value()), "");
  EXPECT_EQ(without_comments(encode_csv(result, "flat").value()), "index_0,\r\n");
}

TEST(EncodeCsv, OfAnUnknownArrayNamesThoseThereAre) {
  const auto refused = encode_csv(test::small_result(), "psd");

  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::bad_parameter);
  EXPECT_EQ(refused.error().subject, "array");
  EXPECT_THAT(refused.error().accepted, testing::ElementsAre("time", "mean", "x", "y", "rms_map"));
}

TEST(EncodeCsv, DoublesReadBackInPythonAsTheSameNumbers) {
  auto numbers = test::any_numbers<double>(5'000, 3);
  Result result;
  result.arrays.push_back(test::array_of("a", {50, 100}, {"m"}, {}, numbers));
  const std::string bytes = encode_csv(result, "a").value() + "!!" + std::string(test::bits_of(numbers));

  EXPECT_EQ(python("import sys, csv, io, numpy as np\n"
                   "text, bits = open(sys.argv[1], 'rb').read().split(b'!!', 1)\n"
                   "given = np.frombuffer(bits, '<f8').reshape(50, 100)\n"
                   "lines = [l for l in text.decode().splitlines() if not l.startswith('#')]\n"
                   "rows = list(csv.reader(lines, strict=True))[1:]\n"
                   "read = np.array([[float(c) if c else np.nan for c in row[1:]] for row in rows])\n"
                   "finite = np.isfinite(given)\n"
                   "print((np.isfinite(read) == finite).all(), (read == given)[finite].all())\n",
                   bytes),
            "True True\n");
}

TEST(EncodeCsv, EveryTableOfAnyResultIsRectangular) {
  std::string all;
  for (std::uint64_t seed = 1; seed <= 100; ++seed) {
    for (const Array& array : test::any_result(seed).arrays)
      all += encode_csv(test::any_result(seed), array.name).value() + "\r\n";
  }
  EXPECT_EQ(python("import sys, csv, io, re\n"
                   "text = open(sys.argv[1], newline='', encoding='utf-8').read()\n"
                   "text = re.sub('^#[^\\r\\n]*\\r\\n', '', text, flags=re.M)\n"
                   "widths, tables = set(), 0\n"
                   "for row in csv.reader(io.StringIO(text, newline=''), strict=True):\n"
                   "    if row: widths.add(len(row))\n"
                   "    elif widths:\n"
                   "        assert len(widths) == 1, widths\n"
                   "        widths, tables = set(), tables + 1\n"
                   "print(tables > 100)\n",
                   all),
            "True\n");
}

}  // namespace
}  // namespace bentlight::query
