// SQLite behind two small owners. Of this room only: SqlFault never leaves it.
#pragma once

#include <sqlite3.h>

#include <cstdint>
#include <map>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <string_view>

#include "daemon/store/record.h"

namespace loadstair::store {

/// An SQLite call that failed. Thrown inside the room, caught at each public function of it.
struct SqlFault {
  int code = 0;  ///< extended result code
  std::string text;

  /// The row itself was refused (a trigger, a constraint): trying again cannot help.
  [[nodiscard]] bool refused_row() const { return (code & 0xff) == SQLITE_CONSTRAINT; }
};

/// What a person should know of a fault while writing `path`.
[[nodiscard]] Failure to_failure(const SqlFault& fault, const std::string& path);

/// A prepared statement; bind, step, read columns, in order.
class Statement {
 public:
  Statement(sqlite3* db, std::string_view sql);
  Statement(const Statement&) = delete;
  Statement& operator=(const Statement&) = delete;
  ~Statement() { sqlite3_finalize(handle_); }

  /// Binds all parameters from the first on, after a reset. NaN is bound as NULL.
  template <class... Values>
  Statement& bind(const Values&... values) {
    sqlite3_reset(handle_);
    int at = 0;
    (bind_one(++at, values), ...);
    return *this;
  }
  /// The next row: true; done: false (and reset).
  bool step();
  /// Runs to its end.
  void run() {
    while (step()) {
    }
  }

  [[nodiscard]] std::int64_t integer(int column) const { return sqlite3_column_int64(handle_, column); }
  [[nodiscard]] std::int32_t small(int column) const { return sqlite3_column_int(handle_, column); }
  [[nodiscard]] double real(int column) const;  ///< NaN for NULL
  [[nodiscard]] std::string text(int column) const;
  [[nodiscard]] std::string_view bytes(int column) const;  ///< until the next step
  [[nodiscard]] bool is_null(int column) const { return sqlite3_column_type(handle_, column) == SQLITE_NULL; }
  [[nodiscard]] std::optional<std::int64_t> maybe_integer(int column) const;
  [[nodiscard]] std::optional<double> maybe_real(int column) const;
  [[nodiscard]] sqlite3_stmt* handle() const { return handle_; }

 private:
  void bind_one(int at, std::int64_t value);
  void bind_one(int at, std::int32_t value) { bind_one(at, std::int64_t{value}); }
  void bind_one(int at, std::uint32_t value) { bind_one(at, std::int64_t{value}); }
  void bind_one(int at, double value);
  void bind_one(int at, std::string_view value);
  void bind_one(int at, const std::string& value) { bind_one(at, std::string_view{value}); }
  void bind_one(int at, const char* value) { bind_one(at, std::string_view{value}); }
  void bind_one(int at, std::span<const unsigned char> blob);
  template <class T>
  void bind_one(int at, const std::optional<T>& value) {
    if (value) {
      bind_one(at, *value);
    } else {
      check(sqlite3_bind_null(handle_, at));
    }
  }
  void check(int code) const;

  sqlite3* db_ = nullptr;
  sqlite3_stmt* handle_ = nullptr;
};

class Record::Connection {
 public:
  /// flags   SQLITE_OPEN_...; may throw SqlFault.
  Connection(const std::string& path, int flags);
  Connection(const Connection&) = delete;
  Connection& operator=(const Connection&) = delete;
  ~Connection();

  void execute(const std::string& sql);
  /// A statement kept for the life of the connection; `sql` is its key.
  Statement& cached(std::string_view sql);
  [[nodiscard]] sqlite3* handle() const { return db_; }
  [[nodiscard]] std::int64_t last_id() const { return sqlite3_last_insert_rowid(db_); }

 private:
  sqlite3* db_ = nullptr;
  std::map<std::string, std::unique_ptr<Statement>, std::less<>> statements_;
};

/// A transaction that rolls back unless committed.
class Transaction {
 public:
  explicit Transaction(Record::Connection& connection, bool write);
  Transaction(const Transaction&) = delete;
  Transaction& operator=(const Transaction&) = delete;
  ~Transaction();
  void commit();

 private:
  Record::Connection& connection_;
  bool open_ = true;
};

}  // namespace loadstair::store
