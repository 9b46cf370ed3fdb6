// JSON: read back by Python's json module; RFC 8259 says what is well formed.
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <nlohmann/json.hpp>

#include "query/encode/encoding.h"
#include "support/result_samples.h"

namespace bentlight::query {
namespace {

using test::python;

TEST(EncodeJson, HasThePromisedShapeInAFixedOrder) {
  EXPECT_EQ(encode_json(test::small_result()),
            R"({"analysis":"statistics","subject":"wall-dome-az90",)"
            R"("values":{"opd_rms_mean":{"value":0.25,"unit":"um","low":0.2,"high":0.3,"level":0.95},)"
            R"("frames":{"value":3,"unit":"1"}},)"
            R"("arrays":{"time":{"shape":[3],"unit":"s","axes":["time"],"data":[0,0.5,1]},)"
            R"("mean":{"shape":[3],"unit":"um","axes":["time"],"data":[0.1,-2,3e-07]},)"
            R"("x":{"shape":[2],"unit":"m","axes":["x"],"data":[-0.05,0.05]},)"
            R"("y":{"shape":[3],"unit":"m","axes":["y"],"data":[-0.1,0,0.1]},)"
            R"("rms_map":{"shape":[3,2],"unit":"um","axes":["y","x"],"data":[0.1,0.2,0.3,0.4,0.5,0.6]}},)"
            R"("warnings":[{"code":"short-window","text":"3 frames, \"few\""}],)"
            R"("provenance":{"digest":"0123abcd","preparation":{"remove":"piston,tilt","first":0}}})");
}

TEST(EncodeJson, OfNothingStillHasEveryMember) {
  EXPECT_EQ(encode_json({}),
            R"({"analysis":"","subject":"","values":{},"arrays":{},"warnings":[],"provenance":{}})");
}

TEST(EncodeJson, NumbersThatAreNotFiniteAreNull) {
  const double nan = std::nan(""), infinity = std::numeric_limits<double>::infinity();
  const Result result{
      .analysis = {},
      .subject = {},
      .values = {{.name = "v", .value = nan, .unit = {"1"}, .low = -infinity, .high = infinity}},
      .arrays = {test::array_of("a", {3}, {"1"}, {}, std::vector{nan, 1.0, -infinity})},
      .warnings = {},
      .provenance = {{"x", nan}}};

  const std::string text = encode_json(result);

  EXPECT_THAT(text, testing::HasSubstr(R"("v":{"value":null,"unit":"1","low":null,"high":null})"));
  EXPECT_THAT(text, testing::HasSubstr(R"("data":[null,1,null])"));
  EXPECT_THAT(text, testing::HasSubstr(R"("provenance":{"x":null})"));
}

template <class Number>
Result one_array(std::vector<Number> data) {
  Result result;
  const std::size_t count = data.size();
  result.arrays.push_back(test::array_of("a", {count}, {"m", 1}, {}, std::move(data)));
  return result;
}

// Python's float() rounds correctly, so a text that reads back to another number was no text of that one.
TEST(EncodeJson, DoublesReadBackInPythonAsTheSameNumbers) {
  const auto numbers = test::any_numbers<double>(20'000, 1);
  const std::string bytes = encode_json(one_array(numbers)) + "\n" + std::string(test::bits_of(numbers));

  EXPECT_EQ(python("import sys, json, numpy as np\n"
                   "text, bits = open(sys.argv[1], 'rb').read().split(b'\\n', 1)\n"
                   "given = np.frombuffer(bits, '<f8')\n"
                   "read = json.loads(text)['arrays']['a']['data']\n"
                   "finite = np.isfinite(given)\n"
                   "print([r is None for r in read] == (~finite).tolist(), (~finite).sum())\n"
                   "read = np.array([float('nan') if r is None else float(r) for r in read])\n"
                   "print((read == given)[finite].all())\n",
                   bytes),
            "True 3\nTrue\n");
}

// A float's shortest digits lie nearest to that float and no other, but not to the double of the same value:
// NumPy reads them as float32. Nine digits always tell floats apart, so no text needs more (from memory: C's
// FLT_DECIMAL_DIG), save whole numbers that are shorter in full than with an exponent.
TEST(EncodeJson, FloatsHaveTheirOwnShortestDigits) {
  const auto numbers = test::any_numbers<float>(20'000, 2);
  const std::string bytes = encode_json(one_array(numbers)) + "\n" + std::string(test::bits_of(numbers));

  EXPECT_EQ(python("import sys, re, numpy as np\n"
                   "text, bits = open(sys.argv[1], 'rb').read().split(b'\\n', 1)\n"
                   "given = np.frombuffer(bits, '<f4')\n"
                   "words = re.search(rb'\"data\":\\[(.*?)\\]', text).group(1).split(b',')\n"
                   "finite = np.isfinite(given)\n"
                   "read = np.array([w.decode() for w, f in zip(words, finite) if f]).astype('f4')\n"
                   "print((read == given[finite]).all())\n"
                   "digits = [len(re.sub(rb'e.*|[-.]', b'', w).strip(b'0')) for w in words if b'.' in w or "
                   "b'e' in w]\n"
                   "print(max(digits) <= 9)\n",
                   bytes),
            "True\nTrue\n");
  EXPECT_THAT(encode_json(one_array(std::vector{0.1F})), testing::HasSubstr("[0.1]"));
}

// RFC 8259, section 7: quotation mark, reverse solidus and control characters must be escaped; the rest may
// stand.
TEST(EncodeJson, AnyTextReadsBackInPython) {
  const std::string text = "µ \"q\" \\ / \n\r\t\x01\x1f 光 🔭 {,}";
  Result result;
  result.analysis = text;
  result.subject = text;
  result.values.push_back({.name = text, .value = 1, .unit = {text}});
  result.arrays.push_back(test::array_of(text, {0}, {text}, {text}, std::vector<double>()));
  result.warnings.push_back({text, text});
  result.provenance[text] = text;

  EXPECT_EQ(python("import sys, json\n"
                   "r = json.loads(open(sys.argv[1], encoding='utf-8').read())\n"
                   "t = 'µ \"q\" \\\\ / \\n\\r\\t\\x01\\x1f 光 🔭 {,}'\n"
                   "print(r == {'analysis': t, 'subject': t, 'values': {t: {'value': 1, 'unit': t}},\n"
                   "            'arrays': {t: {'shape': [0], 'unit': t, 'axes': [t], 'data': []}},\n"
                   "            'warnings': [{'code': t, 'text': t}], 'provenance': {t: t}})\n",
                   encode_json(result)),
            "True\n");
}

TEST(EncodeJson, BytesThatAreNotUtf8DoNotSpoilTheDocument) {
  Result result;
  result.subject = "bad\xff\xc3";
  result.provenance["note"] = "bad\xff";

  const auto parsed = nlohmann::json::parse(encode_json(result));

  EXPECT_EQ(parsed["subject"], "bad\uFFFD\uFFFD");
}

TEST(EncodeJson, IsWellFormedForAnyResult) {
  for (std::uint64_t seed = 1; seed <= 300; ++seed) {
    SCOPED_TRACE(seed);
    const Result result = test::any_result(seed);
    const auto parsed = nlohmann::json::parse(encode_json(result), nullptr, false);
    ASSERT_TRUE(parsed.is_object());
    ASSERT_EQ(parsed["values"].size(), result.values.size());
    for (const Array& array : result.arrays) {
      const auto& read = parsed["arrays"][array.name];
      ASSERT_EQ(read["shape"].get<std::vector<std::size_t>>(), array.shape);
      ASSERT_EQ(read["data"].size(), element_count(array));
    }
  }
}

}  // namespace
}  // namespace bentlight::query
