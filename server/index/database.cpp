#include "index/database.h"

#include <fmt/format.h>
#include <sqlite3.h>

namespace bentlight::index {

namespace {

ErrorCode code_of(int result) {
  switch (result & 0xFF) {
    case SQLITE_FULL:
      return ErrorCode::disk_full;
    case SQLITE_PERM:
    case SQLITE_READONLY:
    case SQLITE_AUTH:
      return ErrorCode::permission_denied;
    case SQLITE_CORRUPT:
    case SQLITE_NOTADB:
      return ErrorCode::damaged_state;
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
      return ErrorCode::overloaded;
    default:
      return ErrorCode::io_error;
  }
}

tl::unexpected<Error> sqlite_failure(sqlite3* database, int result) {
  return failure(
      code_of(result),
      fmt::format("the index: {}", database != nullptr ? sqlite3_errmsg(database) : sqlite3_errstr(result)),
      "index.sqlite");
}

}  // namespace

Query::~Query() {
  if (statement_ == nullptr) return;
  sqlite3_reset(statement_);
  sqlite3_clear_bindings(statement_);
}

Query& Query::bind(std::string_view text) {
  sqlite3_bind_text(statement_, next_++, text.data(), static_cast<int>(text.size()), SQLITE_TRANSIENT);
  return *this;
}

Query& Query::bind(std::int64_t number) {
  sqlite3_bind_int64(statement_, next_++, number);
  return *this;
}

Query& Query::bind(double number) {
  sqlite3_bind_double(statement_, next_++, number);
  return *this;
}

Query& Query::bind(const std::optional<double>& number) {
  if (number) return bind(*number);
  sqlite3_bind_null(statement_, next_++);
  return *this;
}

Expected<bool> Query::step() {
  const int result = sqlite3_step(statement_);
  if (result == SQLITE_ROW) return true;
  if (result == SQLITE_DONE) return false;
  return sqlite_failure(sqlite3_db_handle(statement_), result);
}

Expected<void> Query::run() {
  while (true) {
    const auto row = step();
    if (!row) return failure(row);
    if (!*row) return {};
  }
}

std::string Query::text(int column) const {
  const auto* text = reinterpret_cast<const char*>(sqlite3_column_text(statement_, column));
  return text == nullptr
             ? std::string()
             : std::string(text, static_cast<std::size_t>(sqlite3_column_bytes(statement_, column)));
}

std::int64_t Query::whole(int column) const {
  return sqlite3_column_int64(statement_, column);
}

double Query::real(int column) const {
  return sqlite3_column_double(statement_, column);
}

std::optional<double> Query::real_or_none(int column) const {
  if (sqlite3_column_type(statement_, column) == SQLITE_NULL) return std::nullopt;
  return real(column);
}

Expected<std::unique_ptr<Connection>> Connection::open(const std::filesystem::path& file, bool can_write) {
  sqlite3* database = nullptr;
  const int flags = (can_write ? SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE : SQLITE_OPEN_READWRITE) |
                    SQLITE_OPEN_NOMUTEX | SQLITE_OPEN_EXRESCODE;
  const int result = sqlite3_open_v2(file.c_str(), &database, flags, nullptr);
  std::unique_ptr<Connection> connection(new Connection(database));
  if (result != SQLITE_OK) return sqlite_failure(database, result);
  sqlite3_busy_timeout(database, 5000);
  // A reader of a write-ahead log needs the log's shared index and so a writable handle; the pragma keeps it
  // to reading.
  const std::string settings =
      can_write ? "PRAGMA journal_mode = WAL; PRAGMA synchronous = FULL; PRAGMA foreign_keys = ON;"
                : "PRAGMA query_only = ON;";
  if (auto set = connection->execute(settings); !set) return failure(set);
  return connection;
}

Connection::~Connection() {
  for (const auto& [sql, statement] : statements_) sqlite3_finalize(statement);
  sqlite3_close(database_);
}

Expected<Query> Connection::query(std::string_view sql) {
  auto [place, is_new] = statements_.try_emplace(std::string(sql), nullptr);
  if (is_new) {
    const int result = sqlite3_prepare_v3(database_, sql.data(), static_cast<int>(sql.size()),
                                          SQLITE_PREPARE_PERSISTENT, &place->second, nullptr);
    if (result != SQLITE_OK) {
      statements_.erase(place);
      return sqlite_failure(database_, result);
    }
  }
  return Query(place->second);
}

Expected<void> Connection::execute(const std::string& sql) {
  const int result = sqlite3_exec(database_, sql.c_str(), nullptr, nullptr, nullptr);
  if (result != SQLITE_OK) return sqlite_failure(database_, result);
  return {};
}

std::int64_t Connection::changed_rows() const {
  return sqlite3_total_changes64(database_);
}

Expected<Transaction> Transaction::begin(Connection& connection) {
  if (auto begun = connection.execute("BEGIN IMMEDIATE"); !begun) return failure(begun);
  return Transaction(connection);
}

Transaction::~Transaction() {
  // Nothing can be said of a rollback that fails: SQLite has rolled back already then.
  if (connection_ != nullptr) static_cast<void>(connection_->execute("ROLLBACK"));
}

Expected<void> Transaction::commit() {
  auto committed = connection_->execute("COMMIT");
  if (committed) connection_ = nullptr;
  return committed;
}

Expected<int> version_of(Connection& connection, std::span<const Migration> known) {
  auto asked = connection.query("PRAGMA user_version");
  if (!asked) return failure(asked);
  if (const auto row = asked->step(); !row) return failure(row);
  const auto version = static_cast<int>(asked->whole(0));
  if (version > known.back().version) {
    return failure(ErrorCode::newer_state,
                   fmt::format("the index has version {}, this program knows {}; use the newer program",
                               version, known.back().version),
                   "index.sqlite");
  }
  return version;
}

Expected<void> migrate(Connection& connection, std::span<const Migration> known) {
  const auto version = version_of(connection, known);
  if (!version) return failure(version);
  for (const Migration& migration : known) {
    if (migration.version <= *version) continue;
    auto transaction = Transaction::begin(connection);
    if (!transaction) return failure(transaction);
    if (auto done = connection.execute(std::string(migration.sql)); !done) return done;
    if (auto noted = connection.execute(fmt::format("PRAGMA user_version = {}", migration.version)); !noted) {
      return noted;
    }
    if (auto committed = transaction->commit(); !committed) return committed;
  }
  return {};
}

}  // namespace bentlight::index
