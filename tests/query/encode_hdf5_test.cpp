// HDF5: read by h5py and by h5dump, neither of which shares code with our writer's calls.
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "query/encode/encoding.h"
#include "support/result_samples.h"

namespace bentlight::query {
namespace {

std::string h5py(const std::string& lines, const Result& result) {
  return test::python("import sys, json, h5py, numpy as np\nf = h5py.File(sys.argv[1], 'r')\n" + lines,
                      encode_hdf5(result).value());
}

TEST(EncodeHdf5, HoldsEveryArrayWithItsUnitAndElementType) {
  EXPECT_EQ(h5py("for n, d in sorted(f['arrays'].items()): print(n, d.dtype, d.shape, d.attrs['unit'], "
                 "d[()].tolist())\n",
                 test::small_result()),
            "mean float64 (3,) um [0.1, -2.0, 3e-07]\n"
            "rms_map float32 (3, 2) um [[0.10000000149011612, 0.20000000298023224], [0.30000001192092896, "
            "0.4000000059604645], [0.5, 0.6000000238418579]]\n"
            "time float64 (3,) s [0.0, 0.5, 1.0]\n"
            "x float64 (2,) m [-0.05, 0.05]\n"
            "y float64 (3,) m [-0.1, 0.0, 0.1]\n");
}

TEST(EncodeHdf5, AxesAreDimensionScales) {
  EXPECT_EQ(
      h5py("d = f['arrays/rms_map']\n"
           "print([(len(a), a[0].name, h5py.h5ds.is_scale(a[0].id), a[0][()].tolist()) for a in d.dims])\n"
           "print([a[0].name for a in f['arrays/mean'].dims], [len(a) for a in f['arrays/time'].dims])\n",
           test::small_result()),
      "[(1, '/arrays/y', True, [-0.1, 0.0, 0.1]), (1, '/arrays/x', True, [-0.05, 0.05])]\n"
      "['/arrays/time'] [0]\n");
}

TEST(EncodeHdf5, ValuesAreScalarsWithTheirIntervals) {
  EXPECT_EQ(h5py("v = f['values/opd_rms_mean']\nprint(v.shape, v[()], sorted(v.attrs.items()))\n"
                 "n = f['values/frames']\nprint(n[()], sorted(n.attrs.items()))\n",
                 test::small_result()),
            "() 0.25 [('high', 0.3), ('level', 0.95), ('low', 0.2), ('unit', 'um')]\n3.0 [('unit', '1')]\n");
}

TEST(EncodeHdf5, WarningsAndProvenanceAreJson) {
  EXPECT_EQ(h5py("a = f.attrs\nprint(a['analysis'], a['subject'])\nprint(json.loads(a['warnings']))\n"
                 "print(json.loads(a['provenance']))\n",
                 test::small_result()),
            "statistics wall-dome-az90\n[{'code': 'short-window', 'text': '3 frames, \"few\"'}]\n"
            "{'digest': '0123abcd', 'preparation': {'remove': 'piston,tilt', 'first': 0}}\n");
}

// A field of regard tells of hundreds of files: more than the 64 KiB that an attribute holds in an object's
// header.
TEST(EncodeHdf5, ALongProvenanceFits) {
  Result result;
  result.provenance["inputs"] = nlohmann::ordered_json::array();
  for (int i = 0; i < 20'000; ++i)
    result.provenance["inputs"].push_back({{"view", "wall-dome-az90-el45"}, {"size_bytes", i}});

  EXPECT_EQ(h5py("p = f.attrs['provenance']; i = json.loads(p)['inputs']\nprint(len(p) > 800000, len(i), "
                 "i[-1]['size_bytes'])\n",
                 result),
            "True 20000 19999\n");
}

TEST(EncodeHdf5, AwkwardNamesStayInTheirGroup) {
  Result result;
  for (const char* name : {"µ-map", "a/b", ".", ""}) {
    result.arrays.push_back(test::array_of(name, {1}, {"1"}, {}, std::vector{1.0}));
    result.values.push_back({.name = name, .value = 1, .unit = {"\"1\""}});
  }

  EXPECT_EQ(h5py("print(sorted(f['arrays']) == sorted(['µ-map', 'a_b', '._', '_']) == sorted(f['values']), "
                 "f['values/a_b'].attrs['unit'])\n",
                 result),
            "True \"1\"\n");
}

TEST(EncodeHdf5, EmptyScalarAndNotFiniteNumbersAreKept) {
  Result result;
  result.arrays.push_back(test::array_of("none", {0, 7}, {"m"}, {}, std::vector<float>()));
  result.arrays.push_back(test::array_of("one", {}, {"m"}, {}, std::vector{2.5}));
  result.arrays.push_back(test::array_of(
      "odd", {3}, {"m"}, {"gone"}, std::vector{std::nan(""), std::numeric_limits<double>::infinity(), -0.0}));

  EXPECT_EQ(h5py("print(f['arrays/none'].shape, f['arrays/one'][()], f['arrays/odd'][()])\n", result),
            "(0, 7) 2.5 [nan inf -0.]\n");
}

// A field over time and place may name its axes in an order where an axis lies along another, or along
// itself.
TEST(EncodeHdf5, AnAxisThatDoesNotFitIsLeftAway) {
  Result result = test::small_result();
  result.arrays[4].axes = {"x", "y"};  // exchanged: 3 rows along an x of 2

  EXPECT_EQ(h5py("print([len(a) for a in f['arrays/rms_map'].dims])\n", result), "[0, 0]\n");
}

TEST(EncodeHdf5, OfEqualResultsHasEqualBytes) {
  EXPECT_EQ(encode_hdf5(test::small_result()).value(), encode_hdf5(test::small_result()).value());
}

}  // namespace
}  // namespace bentlight::query
