// The one wrapper around the SQLite library. Nothing outside this folder sees it.
#pragma once

#include <cstdint>
#include <filesystem>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <string_view>
#include <unordered_map>
#include <utility>

#include "base/error.h"

struct sqlite3;
struct sqlite3_stmt;

namespace bentlight::index {

struct Migration {
  int version;
  std::string_view sql;
};
/// schema/migrations in order, built into the program.
std::span<const Migration> migrations();

/// A prepared statement while it is in use: values are bound, never pasted in.
class Query {
 public:
  explicit Query(sqlite3_stmt* statement) : statement_(statement) {}
  ~Query();
  Query(Query&& other) noexcept : statement_(std::exchange(other.statement_, nullptr)), next_(other.next_) {}
  Query(const Query&) = delete;
  Query& operator=(const Query&) = delete;

  Query& bind(std::string_view text);
  Query& bind(std::int64_t number);
  Query& bind(std::uint64_t number) { return bind(static_cast<std::int64_t>(number)); }
  Query& bind(double number);
  Query& bind(const std::optional<double>& number);

  /// The next row. errors  io_error, disk_full, damaged_state
  Expected<bool> step();
  /// Runs to the end, for statements without rows.
  Expected<void> run();

  std::string text(int column) const;
  std::int64_t whole(int column) const;
  std::uint64_t size(int column) const { return static_cast<std::uint64_t>(whole(column)); }
  double real(int column) const;
  std::optional<double> real_or_none(int column) const;

 private:
  sqlite3_stmt* statement_;
  int next_ = 1;
};

/// One connection with its prepared statements.
///
///   threads  one at a time
class Connection {
 public:
  /// errors  io_error, damaged_state, permission_denied
  static Expected<std::unique_ptr<Connection>> open(const std::filesystem::path& file, bool can_write);
  ~Connection();
  Connection(const Connection&) = delete;
  Connection& operator=(const Connection&) = delete;

  /// The statement for `sql`, prepared on first use.
  Expected<Query> query(std::string_view sql);
  Expected<void> execute(const std::string& sql);

  /// Rows inserted, changed or deleted since the connection was opened.
  std::int64_t changed_rows() const;

 private:
  explicit Connection(sqlite3* database) : database_(database) {}
  sqlite3* database_;
  std::unordered_map<std::string, sqlite3_stmt*> statements_;
};

/// BEGIN IMMEDIATE … COMMIT; rolled back when it goes out of scope uncommitted.
class Transaction {
 public:
  static Expected<Transaction> begin(Connection& connection);
  Transaction(Transaction&& other) noexcept : connection_(std::exchange(other.connection_, nullptr)) {}
  Transaction(const Transaction&) = delete;
  Transaction& operator=(const Transaction&) = delete;
  ~Transaction();
  Expected<void> commit();

 private:
  explicit Transaction(Connection& connection) : connection_(&connection) {}
  Connection* connection_;
};

/// The last migration that the index has seen; 0 for an empty one.
///
///   errors  newer_state when it is beyond those of `known`
Expected<int> version_of(Connection& connection, std::span<const Migration> known);

/// Applies those of `known` that the index has not seen, each in a transaction of its own.
///
///   errors  newer_state, io_error, disk_full
Expected<void> migrate(Connection& connection, std::span<const Migration> known);

}  // namespace bentlight::index
