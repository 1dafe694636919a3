#include "daemon/store/connection.h"

#include <cmath>
#include <limits>

namespace loadstair::store {
namespace {

[[noreturn]] void fail(sqlite3* db) {
  throw SqlFault{sqlite3_extended_errcode(db), sqlite3_errmsg(db)};
}

}  // namespace

Failure to_failure(const SqlFault& fault, const std::string& path) {
  const std::string what = "the record " + path + " cannot be written: " + fault.text;
  switch (fault.code & 0xff) {
    case SQLITE_FULL:
      return {Failure::Kind::disk_full,
              what + ". Make room on its disk; nothing that was shown as recorded is lost"};
    case SQLITE_READONLY:
    case SQLITE_PERM:
    case SQLITE_CANTOPEN:
      return {Failure::Kind::read_only, what + ". Make the file and its folder writable"};
    case SQLITE_IOERR:
      return {Failure::Kind::io_error, what + ". Look at the disk; the writer goes on trying"};
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
      return {Failure::Kind::other, what + ". Close the other program that writes to it"};
    default:
      return {Failure::Kind::other, what};
  }
}

Statement::Statement(sqlite3* db, std::string_view sql) : db_{db} {
  if (sqlite3_prepare_v3(db, sql.data(), static_cast<int>(sql.size()), SQLITE_PREPARE_PERSISTENT, &handle_,
                         nullptr) != SQLITE_OK) {
    fail(db);
  }
}

bool Statement::step() {
  const int code = sqlite3_step(handle_);
  if (code == SQLITE_ROW) return true;
  if (code != SQLITE_DONE) {
    const SqlFault fault{sqlite3_extended_errcode(db_), sqlite3_errmsg(db_)};
    sqlite3_reset(handle_);
    throw fault;
  }
  sqlite3_reset(handle_);
  return false;
}

double Statement::real(int column) const {
  return is_null(column) ? std::numeric_limits<double>::quiet_NaN() : sqlite3_column_double(handle_, column);
}

std::string Statement::text(int column) const {
  return std::string{bytes(column)};
}

std::string_view Statement::bytes(int column) const {
  const void* data = sqlite3_column_blob(handle_, column);
  const int size = sqlite3_column_bytes(handle_, column);
  return data == nullptr ? std::string_view{}
                         : std::string_view{static_cast<const char*>(data), static_cast<std::size_t>(size)};
}

std::optional<std::int64_t> Statement::maybe_integer(int column) const {
  return is_null(column) ? std::nullopt : std::optional{integer(column)};
}

std::optional<double> Statement::maybe_real(int column) const {
  return is_null(column) ? std::nullopt : std::optional{real(column)};
}

void Statement::check(int code) const {
  if (code != SQLITE_OK) fail(db_);
}

void Statement::bind_one(int at, std::int64_t value) {
  check(sqlite3_bind_int64(handle_, at, value));
}

void Statement::bind_one(int at, double value) {
  check(std::isnan(value) ? sqlite3_bind_null(handle_, at) : sqlite3_bind_double(handle_, at, value));
}

void Statement::bind_one(int at, std::string_view value) {
  check(sqlite3_bind_text64(handle_, at, value.data() == nullptr ? "" : value.data(), value.size(),
                            SQLITE_TRANSIENT, SQLITE_UTF8));
}

void Statement::bind_one(int at, std::span<const unsigned char> blob) {
  check(sqlite3_bind_blob64(handle_, at, blob.data(), blob.size(), SQLITE_TRANSIENT));
}

Record::Connection::Connection(const std::string& path, int flags) {
  const int code =
      sqlite3_open_v2(path.c_str(), &db_, flags | SQLITE_OPEN_NOMUTEX | SQLITE_OPEN_EXRESCODE, nullptr);
  if (code != SQLITE_OK) {
    SqlFault fault{code, db_ == nullptr ? sqlite3_errstr(code) : sqlite3_errmsg(db_)};
    sqlite3_close_v2(db_);
    throw fault;
  }
  sqlite3_busy_timeout(db_, 1000);
}

Record::Connection::~Connection() {
  statements_.clear();
  sqlite3_close_v2(db_);
}

void Record::Connection::execute(const std::string& sql) {
  if (sqlite3_exec(db_, sql.c_str(), nullptr, nullptr, nullptr) != SQLITE_OK) fail(db_);
}

Statement& Record::Connection::cached(std::string_view sql) {
  auto found = statements_.find(sql);
  if (found == statements_.end()) {
    found = statements_.emplace(std::string{sql}, std::make_unique<Statement>(db_, sql)).first;
  }
  return *found->second;
}

Transaction::Transaction(Record::Connection& connection, bool write) : connection_{connection} {
  connection_.execute(write ? "BEGIN IMMEDIATE" : "BEGIN");
}

Transaction::~Transaction() {
  // SQLite may have rolled back by itself (a full disk, an I/O error).
  if (open_ && sqlite3_get_autocommit(connection_.handle()) == 0) {
    sqlite3_exec(connection_.handle(), "ROLLBACK", nullptr, nullptr, nullptr);
  }
}

void Transaction::commit() {
  connection_.execute("COMMIT");
  open_ = false;
}

}  // namespace loadstair::store
