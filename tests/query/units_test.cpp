#include "query/units.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <random>

#include "support/result_samples.h"

namespace bentlight::query {
namespace {

Result measured() {
  Result result;
  result.values.push_back(
      {.name = "opd_rms", .value = 2e-7, .unit = {"m", 1}, .low = 1e-7, .high = 3e-7, .level = 0.95});
  result.values.push_back({.name = "mean_square", .value = 4e-14, .unit = {"m2", 2}});
  result.values.push_back({.name = "aperture", .value = 0.25, .unit = {"m", 0}});
  result.arrays.push_back(
      test::array_of("psd", {2}, {"m2/Hz", 2}, {"frequency"}, std::vector{1e-18, std::nan("")}));
  result.arrays.push_back(test::array_of("density", {1}, {"1/m", -1}, {}, std::vector{5e6}));
  result.arrays.push_back(test::array_of("map", {1}, {"m", 1}, {}, std::vector{1.5e-6F}));
  result.arrays.push_back(test::array_of("jitter", {1}, {"rad2/Hz", 0}, {}, std::vector{1e-12}));
  return result;
}

TEST(LengthUnit, IsFoundByItsName) {
  for (const LengthUnit unit :
       {LengthUnit::m, LengthUnit::um, LengthUnit::nm, LengthUnit::waves, LengthUnit::normalised}) {
    EXPECT_EQ(parse_length_unit(to_text(unit)), unit);
  }
}

TEST(LengthUnit, OfAnUnknownNameSaysWhatThereIs) {
  for (const char* name : {"", "µm", "inch", "UM"}) {
    const auto refused = parse_length_unit(name);
    ASSERT_FALSE(refused) << name;
    EXPECT_EQ(refused.error().code, ErrorCode::bad_unit);
    EXPECT_EQ(refused.error().subject, "length_unit");
    EXPECT_THAT(refused.error().accepted, testing::ElementsAre("um", "nm", "m", "waves", "normalised"));
  }
}

// Each factor is a power of ten or one rounding away from it, and the product one more: 4 ulp are ample.
TEST(Convert, ScalesByThePowerOfLengthAndRenames) {
  Result result = measured();

  ASSERT_TRUE(convert(result, LengthUnit::um, {}));

  EXPECT_DOUBLE_EQ(result.value("opd_rms")->value, 0.2);
  EXPECT_EQ(result.value("opd_rms")->unit, (Unit{"um", 1}));
  EXPECT_DOUBLE_EQ(result.value("mean_square")->value, 0.04);
  EXPECT_EQ(result.value("mean_square")->unit.name, "um2");
  const auto& psd = std::get<std::vector<double>>(result.array("psd")->data);
  EXPECT_DOUBLE_EQ(psd[0], 1e-6);
  EXPECT_TRUE(std::isnan(psd[1]));
  EXPECT_EQ(result.array("psd")->unit.name, "um2/Hz");
  EXPECT_DOUBLE_EQ(std::get<std::vector<double>>(result.array("density")->data)[0], 5.0);
  EXPECT_EQ(result.array("density")->unit.name, "1/um");
  EXPECT_FLOAT_EQ(std::get<std::vector<float>>(result.array("map")->data)[0], 1.5F);
  EXPECT_EQ(result.provenance["length_unit"]["unit"], "um");
}

TEST(Convert, TakesTheIntervalAlongAndNotItsLevel) {
  Result result = measured();

  ASSERT_TRUE(convert(result, LengthUnit::nm, {}));

  EXPECT_DOUBLE_EQ(*result.values[0].low, 100.0);
  EXPECT_DOUBLE_EQ(*result.values[0].high, 300.0);
  EXPECT_EQ(*result.values[0].level, 0.95);
}

TEST(Convert, LeavesAloneWhatHoldsNoOpticalPath) {
  for (const LengthUnit unit : {LengthUnit::um, LengthUnit::waves}) {
    Result result = measured();

    ASSERT_TRUE(convert(result, unit, {.wavelength_m = 1e-6}));

    EXPECT_EQ(result.value("aperture")->value, 0.25);
    EXPECT_EQ(result.value("aperture")->unit.name, "m");
    EXPECT_EQ(result.array("jitter")->unit.name, "rad2/Hz");
    EXPECT_EQ(std::get<std::vector<double>>(result.array("jitter")->data)[0], 1e-12);
  }
}

TEST(Convert, InWavesDividesByTheWavelength) {
  Result result = measured();

  ASSERT_TRUE(convert(result, LengthUnit::waves, {.wavelength_m = 5e-7}));

  EXPECT_DOUBLE_EQ(result.value("opd_rms")->value, 0.4);
  EXPECT_EQ(result.value("opd_rms")->unit.name, "waves");
  EXPECT_DOUBLE_EQ(result.value("mean_square")->value, 0.16);
  EXPECT_EQ(result.array("psd")->unit.name, "waves2/Hz");
  EXPECT_DOUBLE_EQ(std::get<std::vector<double>>(result.array("density")->data)[0], 2.5);
  EXPECT_EQ(result.provenance["length_unit"]["wavelength_m"], 5e-7);
}

// Half the sea-level density of the 1976 standard atmosphere, Mach 0.5, 0.4 m: 0.5 * 0.25 * 0.4 m = 0.05 m.
TEST(Convert, NormalisedDividesByDensityMachSquaredAndLength) {
  Result result = measured();

  ASSERT_TRUE(convert(result, LengthUnit::normalised,
                      {.density_kg_m3 = 0.6125, .mach = 0.5, .reference_length_m = 0.4}));

  EXPECT_DOUBLE_EQ(result.value("opd_rms")->value, 4e-6);
  EXPECT_EQ(result.value("opd_rms")->unit.name, "1");
  EXPECT_DOUBLE_EQ(result.value("mean_square")->value, 1.6e-11);
  EXPECT_EQ(result.array("psd")->unit.name, "1/Hz");
  EXPECT_EQ(result.array("density")->unit.name, "1");
  const auto& account = result.provenance["length_unit"];
  EXPECT_DOUBLE_EQ(account["divided_by_m"].get<double>(), 0.05);
  EXPECT_EQ(account["mach"], 0.5);
  EXPECT_EQ(account["density_kg_m3"], 0.6125);
  EXPECT_EQ(account["reference_length_m"], 0.4);
}

TEST(Convert, WithoutAConditionSaysWhichAndChangesNothing) {
  const OpticalConditions all{
      .wavelength_m = 1e-6, .density_kg_m3 = 1.2, .mach = 0.4, .reference_length_m = 0.3};
  struct Case {
    LengthUnit unit;
    std::optional<double> OpticalConditions::*condition;
    std::string attribute;
  };
  for (const Case& each :
       {Case{LengthUnit::waves, &OpticalConditions::wavelength_m, "wavelength_m"},
        Case{LengthUnit::normalised, &OpticalConditions::density_kg_m3, "density_kg_m3"},
        Case{LengthUnit::normalised, &OpticalConditions::mach, "mach"},
        Case{LengthUnit::normalised, &OpticalConditions::reference_length_m, "reference_length_m"}}) {
    for (const std::optional<double> stated :
         {std::optional<double>(), std::optional(0.0), std::optional(std::nan(""))}) {
      OpticalConditions conditions = all;
      conditions.*each.condition = stated;
      Result result = measured();

      const auto refused = convert(result, each.unit, conditions);

      ASSERT_FALSE(refused) << each.attribute;
      EXPECT_EQ(refused.error().code, ErrorCode::missing_condition);
      EXPECT_THAT(refused.error().text, testing::HasSubstr(each.attribute));
      EXPECT_EQ(result.value("opd_rms")->value, 2e-7);
      EXPECT_EQ(result.value("opd_rms")->unit.name, "m");
    }
  }
}

TEST(Convert, AsksForNoConditionWhereNothingIsConverted) {
  Result result;
  result.values.push_back({.name = "frames", .value = 3, .unit = {"1", 0}});

  EXPECT_TRUE(convert(result, LengthUnit::waves, {}));
}

TEST(Convert, ToMetresChangesNoNumber) {
  const Result before = measured();
  Result result = before;

  ASSERT_TRUE(convert(result, LengthUnit::m, {}));

  EXPECT_EQ(result.values[0].value, before.values[0].value);
  EXPECT_EQ(result.values[0].unit, before.values[0].unit);
  EXPECT_EQ(result.arrays[2].data, before.arrays[2].data);
}

// A ratio of two OPDs of one result is the same in every unit; each conversion rounds at most three times.
TEST(Convert, KeepsRatios) {
  std::mt19937_64 random(7);
  std::uniform_real_distribution<double> opd(1e-9, 1e-5), condition(0.1, 2.0);
  for (int i = 0; i < 200; ++i) {
    const double first = opd(random), second = opd(random);
    Result result;
    result.values.push_back({.name = "a", .value = first, .unit = {"m", 1}});
    result.values.push_back({.name = "b", .value = second * second, .unit = {"m2", 2}});
    const OpticalConditions conditions{.wavelength_m = condition(random) * 1e-6,
                                       .density_kg_m3 = condition(random),
                                       .mach = condition(random),
                                       .reference_length_m = condition(random)};

    ASSERT_TRUE(convert(result, i % 2 == 0 ? LengthUnit::waves : LengthUnit::normalised, conditions));

    const double ratio = result.values[0].value * result.values[0].value / result.values[1].value;
    EXPECT_NEAR(ratio / (first * first / (second * second)), 1.0, 8 * std::numeric_limits<double>::epsilon());
  }
}

TEST(WithLength, FollowsTheGrammarOfUnits) {
  EXPECT_EQ(with_length("m", 1, "um"), "um");
  EXPECT_EQ(with_length("m2", 2, "um"), "um2");
  EXPECT_EQ(with_length("m2/Hz", 2, "waves"), "waves2/Hz");
  EXPECT_EQ(with_length("m2/Hz", 2, ""), "1/Hz");
  EXPECT_EQ(with_length("1/m", -1, "um"), "1/um");
  EXPECT_EQ(with_length("1/m2", -2, ""), "1");
  EXPECT_EQ(with_length("Pa m/Hz", 1, "um"), "Pa um/Hz");
  EXPECT_EQ(with_length("m rad/Hz", 1, ""), "rad/Hz");
  EXPECT_EQ(with_length("m/m", 1, "um"), "um/m");
  EXPECT_EQ(with_length("m2", 1, "um"), "um m");  // an OPD times a length of the aperture
  EXPECT_EQ(with_length("m/s", 1, "nm"), "nm/s");
  EXPECT_EQ(with_length("rad2/Hz", 0, "um"), "rad2/Hz");
  EXPECT_EQ(with_length("mm m", 1, "um"), "mm um");  // mm is no metre
}

TEST(WithLength, OfAUnitWithoutThatLengthIsAFaultOfTheProgram) {
  EXPECT_THROW(with_length("rad", 1, "um"), std::invalid_argument);
  EXPECT_THROW(with_length("m", 2, "um"), std::invalid_argument);
  EXPECT_THROW(with_length("m", -1, "um"), std::invalid_argument);
  EXPECT_THROW(with_length("um", 1, "nm"), std::invalid_argument);
}

}  // namespace
}  // namespace bentlight::query
