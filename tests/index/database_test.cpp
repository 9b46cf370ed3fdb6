#include "index/database.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <fstream>
#include <iterator>
#include <regex>
#include <vector>

#include "support/temporary_folder.h"

namespace bentlight::index {
namespace {

using test::TemporaryFolder;
using testing::HasSubstr;

std::unique_ptr<Connection> opened(const std::filesystem::path& file) {
  return Connection::open(file, true).value();
}

std::vector<std::string> lines(Connection& connection, const std::string& sql) {
  std::vector<std::string> found;
  auto query = connection.query(sql).value();
  while (query.step().value()) found.push_back(query.text(0));
  return found;
}

/// What the database holds, each statement without comments and with single blanks.
std::vector<std::string> schema(Connection& connection) {
  auto statements =
      lines(connection, "SELECT sql FROM sqlite_schema WHERE sql IS NOT NULL ORDER BY type, name");
  for (auto& sql : statements) {
    sql = std::regex_replace(sql, std::regex("--[^\n]*"), "");
    sql = std::regex_replace(sql, std::regex("\\s+"), " ");
  }
  return statements;
}

std::string text_of(const std::filesystem::path& path) {
  std::ifstream stream(path);
  return {std::istreambuf_iterator<char>(stream), {}};
}

TEST(Migrations, GiveTheSchemaThatIsShownToReaders) {
  const TemporaryFolder folder;
  const auto migrated = opened(folder.path() / "migrated"), shown = opened(folder.path() / "shown");
  ASSERT_TRUE(migrate(*migrated, migrations()));
  ASSERT_TRUE(shown->execute(text_of(BENTLIGHT_SOURCE "/schema/index.sql")));

  EXPECT_EQ(schema(*migrated), schema(*shown));
  EXPECT_FALSE(schema(*shown).empty());
}

TEST(Migrations, AreNumberedFromOneWithoutGaps) {
  int expected = 1;
  for (const Migration& migration : migrations()) EXPECT_EQ(migration.version, expected++);
}

TEST(Migrations, MakeStrictTables) {
  const TemporaryFolder folder;
  const auto connection = opened(folder.path() / "index");
  ASSERT_TRUE(migrate(*connection, migrations()));

  EXPECT_THAT(
      lines(*connection, "SELECT name FROM pragma_table_list WHERE NOT strict AND name NOT LIKE 'sqlite_%'"),
      testing::IsEmpty());
}

TEST(Migrations, AreAppliedOnce) {
  const TemporaryFolder folder;
  const auto connection = opened(folder.path() / "index");
  ASSERT_TRUE(migrate(*connection, migrations()));
  ASSERT_TRUE(connection->execute("INSERT INTO refusal VALUES ('a.h5', 'not-hdf5', 'no', 1, 2, 3, 4)"));

  ASSERT_TRUE(migrate(*connection, migrations()));

  EXPECT_THAT(lines(*connection, "SELECT path FROM refusal"), testing::ElementsAre("a.h5"));
  EXPECT_EQ(version_of(*connection, migrations()), migrations().back().version);
}

class MigrationsToCome : public testing::Test {
 protected:
  MigrationsToCome() {
    EXPECT_TRUE(migrate(*connection_, migrations()));
    EXPECT_TRUE(connection_->execute("INSERT INTO refusal VALUES ('a.h5', 'not-hdf5', 'no', 1, 2, 3, 4)"));
  }

  std::vector<Migration> with(std::string_view sql) const {
    std::vector<Migration> known(migrations().begin(), migrations().end());
    known.push_back({.version = known.back().version + 1, .sql = sql});
    return known;
  }

  const TemporaryFolder folder_;
  const std::unique_ptr<Connection> connection_ = opened(folder_.path() / "index");
};

TEST_F(MigrationsToCome, KeepTheRowsThatAreThere) {
  const auto known = with("ALTER TABLE refusal ADD COLUMN tries INTEGER NOT NULL DEFAULT 1;");

  ASSERT_TRUE(migrate(*connection_, known));

  EXPECT_THAT(lines(*connection_, "SELECT path || tries FROM refusal"), testing::ElementsAre("a.h51"));
  EXPECT_EQ(version_of(*connection_, known), known.back().version);
}

TEST_F(MigrationsToCome, ThatFailLeaveTheIndexAsItWas) {
  const auto before = schema(*connection_);
  const auto known =
      with("ALTER TABLE refusal ADD COLUMN tries INTEGER; DELETE FROM refusal; SELECT no_such_column;");

  EXPECT_FALSE(migrate(*connection_, known));

  EXPECT_EQ(schema(*connection_), before);
  EXPECT_THAT(lines(*connection_, "SELECT path FROM refusal"), testing::ElementsAre("a.h5"));
  EXPECT_EQ(version_of(*connection_, known), migrations().back().version);
}

TEST_F(MigrationsToCome, KeepAnOlderProgramAway) {
  ASSERT_TRUE(migrate(*connection_, with("CREATE TABLE more (a INTEGER) STRICT;")));

  const auto refused = migrate(*connection_, migrations());

  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::newer_state);
  EXPECT_THAT(refused.error().text, HasSubstr("use the newer program"));
}

TEST(Connection, IsSetAsThePromisesNeedIt) {
  const TemporaryFolder folder;
  const auto writer = opened(folder.path() / "index");
  EXPECT_THAT(lines(*writer, "PRAGMA journal_mode"), testing::ElementsAre("wal"));
  EXPECT_THAT(lines(*writer, "PRAGMA synchronous"), testing::ElementsAre("2"));  // FULL
  EXPECT_THAT(lines(*writer, "PRAGMA foreign_keys"), testing::ElementsAre("1"));

  const auto reader = Connection::open(folder.path() / "index", false).value();
  EXPECT_FALSE(reader->execute("CREATE TABLE a (b INTEGER)"));
}

TEST(Connection, BindsTextThatLooksLikeSql) {
  const TemporaryFolder folder;
  const auto connection = opened(folder.path() / "index");
  ASSERT_TRUE(connection->execute("CREATE TABLE a (b TEXT) STRICT"));
  const std::string hostile = "'); DROP TABLE a; --" + std::string("\0nul", 4);

  ASSERT_TRUE(connection->query("INSERT INTO a VALUES (?)").value().bind(std::string_view(hostile)).run());

  EXPECT_THAT(lines(*connection, "SELECT b FROM a"), testing::ElementsAre(hostile));
}

TEST(Transaction, IsUndoneUnlessItIsCommitted) {
  const TemporaryFolder folder;
  const auto connection = opened(folder.path() / "index");
  ASSERT_TRUE(connection->execute("CREATE TABLE a (b INTEGER) STRICT"));
  {
    const auto transaction = Transaction::begin(*connection).value();
    ASSERT_TRUE(connection->execute("INSERT INTO a VALUES (1)"));
  }
  {
    auto transaction = Transaction::begin(*connection).value();
    ASSERT_TRUE(connection->execute("INSERT INTO a VALUES (2)"));
    ASSERT_TRUE(transaction.commit());
  }

  EXPECT_THAT(lines(*connection, "SELECT b FROM a"), testing::ElementsAre("2"));
}

}  // namespace
}  // namespace bentlight::index
