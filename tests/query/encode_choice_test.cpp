// Which encoding a reply takes, and what every encoded reply says of itself.
#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "query/encode/encoding.h"
#include "support/result_samples.h"

namespace bentlight::query {
namespace {

TEST(Encoding, IsFoundByItsName) {
  for (const Encoding encoding : all_encodings()) EXPECT_EQ(parse_encoding(name(encoding)), encoding);
}

TEST(Encoding, OfAnUnknownNameSaysWhatThereIs) {
  const auto refused = parse_encoding("xml");

  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::unsupported_encoding);
  EXPECT_THAT(refused.error().accepted, testing::ElementsAre("json", "csv", "npy", "hdf5"));
}

struct Negotiation {
  std::string accept;
  Encoding chosen;
};

class NegotiatedEncoding : public testing::TestWithParam<Negotiation> {};

TEST_P(NegotiatedEncoding, IsTheBestOnOffer) {
  EXPECT_EQ(negotiated_encoding(GetParam().accept), GetParam().chosen);
}

// RFC 9110, section 12.5.1: an absent field accepts anything; quality 0 is not acceptable; the most specific
// range that matches a type decides about it.
INSTANTIATE_TEST_SUITE_P(
    Rfc9110,
    NegotiatedEncoding,
    testing::Values(Negotiation{"", Encoding::json},
                    Negotiation{"*/*", Encoding::json},
                    Negotiation{"text/csv", Encoding::csv},
                    Negotiation{"TEXT/CSV", Encoding::csv},
                    Negotiation{"text/csv; charset=utf-8", Encoding::csv},
                    Negotiation{"text/*", Encoding::csv},
                    Negotiation{"application/*", Encoding::json},
                    Negotiation{"application/x-npy", Encoding::npy},
                    Negotiation{"application/x-hdf5, */*;q=0.1", Encoding::hdf5},
                    Negotiation{"application/json;q=0.5, text/csv", Encoding::csv},
                    Negotiation{"application/json;q=0.5,text/csv;q=0.4", Encoding::json},
                    Negotiation{"*/*, application/json;q=0", Encoding::csv},
                    Negotiation{"*/*;q=0.5, application/*;q=0.1, text/*;q=0.2", Encoding::csv},
                    // What browsers send when a person opens the address.
                    Negotiation{"text/html,application/xhtml+xml,application/xml;q=0.9,image/avif,*/*;q=0.8",
                                Encoding::json},
                    // The RFC's example of precedence: of text/plain;q=0.7, text/*;q=0.3 and */*;q=0.5 the
                    // last is for JSON.
                    Negotiation{"text/*;q=0.3, text/plain;q=0.7, text/plain;format=flowed, */*;q=0.5",
                                Encoding::json},
                    // Not media ranges at all.
                    Negotiation{"json", Encoding::json},
                    Negotiation{"/, ;;, */csv, text/csv;q=2", Encoding::json}));

TEST(NegotiatedEncoding, RefusesWhatIsNotOnOffer) {
  for (const char* accept : {"image/png", "application/json;q=0", "*/*;q=0", "text/html, text/plain"}) {
    SCOPED_TRACE(accept);
    const auto refused = negotiated_encoding(accept);
    ASSERT_FALSE(refused);
    EXPECT_EQ(refused.error().code, ErrorCode::unsupported_encoding);
    EXPECT_THAT(refused.error().accepted, testing::Contains("application/x-npy"));
  }
}

TEST(Encode, SaysTypeAndSuffix) {
  const Result result = test::small_result();
  const auto described = [&](Encoding encoding, const std::string& array) {
    const auto encoded = encode(result, encoding, {.array = array}).value();
    EXPECT_FALSE(encoded.bytes->empty());
    return fmt::format("{} .{}", encoded.content_type, encoded.file_suffix);
  };

  EXPECT_EQ(described(Encoding::json, ""), "application/json .json");
  EXPECT_EQ(described(Encoding::csv, ""), "text/csv; charset=utf-8 .csv");
  EXPECT_EQ(described(Encoding::npy, "mean"), "application/x-npy .npy");
  EXPECT_EQ(described(Encoding::hdf5, ""), "application/x-hdf5 .h5");
}

// An unknown parameter is an error, never ignored; so is a known one that would change nothing.
TEST(Encode, RefusesAnArrayWhereEverythingIsEncoded) {
  for (const Encoding encoding : {Encoding::json, Encoding::hdf5}) {
    const auto refused = encode(test::small_result(), encoding, {.array = "mean"});
    ASSERT_FALSE(refused);
    EXPECT_EQ(refused.error().code, ErrorCode::bad_parameter);
    EXPECT_EQ(refused.error().subject, "array");
  }
}

TEST(Encode, EveryEncodingTakesAnyResult) {
  for (std::uint64_t seed = 1; seed <= 60; ++seed) {
    SCOPED_TRACE(seed);
    const Result result = test::any_result(seed);
    EXPECT_TRUE(encode(result, Encoding::json));
    EXPECT_TRUE(encode(result, Encoding::csv));
    EXPECT_TRUE(encode(result, Encoding::hdf5));
    for (const Array& array : result.arrays)
      EXPECT_TRUE(encode(result, Encoding::npy, {.array = array.name}));
  }
}

}  // namespace
}  // namespace bentlight::query
