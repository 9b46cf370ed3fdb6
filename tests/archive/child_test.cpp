#include "archive/child.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <signal.h>

#include <chrono>
#include <fstream>

#include "archive/probe_client.h"
#include "base/file.h"
#include "support/temporary_folder.h"

namespace bentlight::archive {
namespace {

using namespace std::chrono_literals;

const PosixFileSystem files;

class Child : public testing::Test {
 protected:
  Child() {
    std::ofstream(folder_.path() / "given") << "given";
    given_ = files.open(folder_.path() / "given").value();
  }

  ChildEnd run(const std::string& script, std::chrono::milliseconds limit = 10s) {
    return run_child({.program = "/bin/sh",
                      .arguments = {"-c", script},
                      .file_descriptor = given_->descriptor(),
                      .time_limit = limit,
                      .output_limit_bytes = 100'000})
        .value();
  }

  static std::string text(const ChildEnd& end) {
    return {reinterpret_cast<const char*>(end.output.data()), end.output.size()};
  }

  test::TemporaryFolder folder_;
  std::unique_ptr<ReadFile> given_;
};

TEST_F(Child, GetsTheFileAsADescriptorAndGivesItsOutput) {
  const ChildEnd end = run("cat <&3; echo; exit 7");

  EXPECT_EQ(text(end), "given\n");
  EXPECT_EQ(end.exit_code, 7);
  EXPECT_EQ(end.signal, 0);
}

TEST_F(Child, GetsNothingElse) {
  ::setenv("BENTLIGHT_SECRET", "hush", 1);
  std::ofstream open_too(folder_.path() / "open too");

  const ChildEnd end = run("cat; env; ls /proc/self/fd; echo noise >&2");

  EXPECT_THAT(text(end), testing::Not(testing::HasSubstr("hush")));
  EXPECT_THAT(text(end), testing::Not(testing::HasSubstr("noise")));
  EXPECT_THAT(text(end), testing::EndsWith("\n0\n1\n2\n3\n4\n"));  // 4 is how ls looks
}

TEST_F(Child, IsReportedWhenASignalKillsIt) {
  EXPECT_EQ(run("kill -SEGV $$").signal, SIGSEGV);
}

TEST_F(Child, IsKilledWhenItTakesTooLong) {
  const auto begin = std::chrono::steady_clock::now();

  const ChildEnd end = run("sleep 100", 200ms);

  EXPECT_TRUE(end.out_of_time);
  EXPECT_LT(std::chrono::steady_clock::now() - begin, 20s);
}

TEST_F(Child, IsKilledWhenItSaysTooMuch) {
  const ChildEnd end = run("while :; do echo more and more and more; done");

  EXPECT_TRUE(end.out_of_output);
  EXPECT_LE(end.output.size(), 100'000);
}

TEST_F(Child, CannotHoldUpTheCallerByClosingItsOutput) {
  const auto begin = std::chrono::steady_clock::now();

  const ChildEnd end = run("exec >&-; sleep 100");

  EXPECT_NE(end.signal, 0);
  EXPECT_LT(std::chrono::steady_clock::now() - begin, 20s);
}

TEST_F(Child, ThatCannotBeStartedIsAFaultOfTheInstallation) {
  const auto end = run_child({.program = folder_.path() / "absent",
                              .arguments = {},
                              .file_descriptor = given_->descriptor(),
                              .time_limit = 1s,
                              .output_limit_bytes = 1});

  ASSERT_FALSE(end);
  EXPECT_EQ(end.error().code, ErrorCode::io_error);
}

// What stands in for the probe here does what a taken-over or dying parser may do.
TEST_F(Child, InTheProbesPlaceCannotPassOffNonsense) {
  const auto program = folder_.path() / "probe";
  const auto answer = [&](const std::string& script) {
    std::ofstream(program) << "#!/bin/sh\n" << script << "\n";
    std::filesystem::permissions(program, std::filesystem::perms::owner_all);
    const auto file = ProbeClient(program).read_structure(files, folder_.path() / "given", Layout{});
    return file ? Error{} : file.error();
  };

  const Error died = answer("kill -SEGV $$");
  EXPECT_EQ(died.code, ErrorCode::damaged_file);
  EXPECT_THAT(died.text, testing::HasSubstr("signal 11"));
  EXPECT_EQ(answer("exit 0").code, ErrorCode::damaged_file);
  EXPECT_EQ(answer("echo nonsense, and more than eight bytes of it").code, ErrorCode::damaged_file);
  EXPECT_EQ(answer(R"(printf '\002\000\000\000\000\000\000\000{}')").code, ErrorCode::damaged_file);
  EXPECT_EQ(answer(R"(printf '\002\000\000\000\000\000\000\000[]')").code, ErrorCode::damaged_file);
  EXPECT_EQ(answer(R"(printf '\377\377\377\377\377\377\377\377{}')").code, ErrorCode::damaged_file);
  EXPECT_EQ(answer("exit 1").code, ErrorCode::damaged_file);
  EXPECT_EQ(answer("exit 42").code, ErrorCode::io_error);  // what the probe says when it gets no cage
  EXPECT_EQ(answer("echo more >> '" + (folder_.path() / "given").string() + "'; kill -SEGV $$").code,
            ErrorCode::file_changed);
}

}  // namespace
}  // namespace bentlight::archive
