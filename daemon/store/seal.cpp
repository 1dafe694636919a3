#include "daemon/store/seal.h"

#include <bit>

#include "analysis/base/number.h"
#include "daemon/store/bytes.h"
#include "daemon/store/schema.h"

namespace loadstair::store {
namespace {

/// Eight bytes, least significant first, on every machine.
void add_integer(Hasher& hasher, std::uint64_t value) {
  std::array<char, 8> bytes{};
  for (char& byte : bytes) {
    byte = static_cast<char>(value & 0xffU);
    value >>= 8U;
  }
  hasher.add({bytes.data(), bytes.size()});
}

void add_column(Hasher& hasher, const Statement& row, int column) {
  switch (sqlite3_column_type(row.handle(), column)) {
    case SQLITE_INTEGER:
      hasher.add("i");
      add_integer(hasher, static_cast<std::uint64_t>(row.integer(column)));
      break;
    case SQLITE_FLOAT:
      hasher.add("f");
      add_integer(hasher, std::bit_cast<std::uint64_t>(row.real(column)));
      break;
    case SQLITE_NULL:
      hasher.add("n");
      break;
    default: {
      const std::string_view bytes = row.bytes(column);
      hasher.add("t");
      add_integer(hasher, bytes.size());
      hasher.add(bytes);
    }
  }
}

/// Digests every row of every table of the run: name of the table, then each column with its type and length.
Digest content_of(Record::Connection& connection, RunId run) {
  Hasher hasher;
  for (const SealedTable& table : sealed_tables()) {
    hasher.add(table.name);
    hasher.add("\n");
    Statement rows{connection.handle(),
                   "SELECT " + std::string{table.columns} + " FROM " + std::string{table.name} + " WHERE " +
                       (table.name == "run" ? "id" : "run") + " = ? ORDER BY " + std::string{table.order}};
    rows.bind(run);
    const int columns = sqlite3_column_count(rows.handle());
    while (rows.step()) {
      for (int column = 0; column < columns; ++column) add_column(hasher, rows, column);
    }
  }
  return hasher.finish();
}

std::string_view view_of(const Digest& digest) {
  return {reinterpret_cast<const char*>(digest.data()), digest.size()};
}

Digest chain_digest(const Digest& previous, RunId run, const Digest& content) {
  Hasher hasher;
  hasher.add(view_of(previous));
  add_integer(hasher, static_cast<std::uint64_t>(run));
  hasher.add(view_of(content));
  return hasher.finish();
}

bool to_digest(std::string_view bytes, Digest& digest) {
  if (bytes.size() != digest.size()) return false;
  for (std::size_t i = 0; i < digest.size(); ++i) digest[i] = static_cast<unsigned char>(bytes[i]);
  return true;
}

}  // namespace

void seal_run(Record::Connection& connection, RunId run, std::int64_t when_utc_ns) {
  Statement state{connection.handle(), "SELECT state FROM run WHERE id = ?"};
  if (!state.bind(run).step() || state.text(0) == name_of(RunState::running)) {
    throw SqlFault{SQLITE_CONSTRAINT,
                   "run " + base::print_integer(run) + " has not ended and cannot be sealed"};
  }
  Digest previous{};
  Statement last{connection.handle(), "SELECT digest FROM seal ORDER BY id DESC LIMIT 1"};
  if (last.step() && !to_digest(last.bytes(0), previous)) {
    throw SqlFault{SQLITE_CORRUPT, "the last seal's digest is not 32 bytes"};
  }
  const Digest content = content_of(connection, run);
  const Digest digest = chain_digest(previous, run, content);
  Statement insert{connection.handle(),
                   "INSERT INTO seal (run, when_ns, previous, content, digest) VALUES (?, ?, ?, ?, ?)"};
  insert
      .bind(run, when_utc_ns, std::span<const unsigned char>{previous},
            std::span<const unsigned char>{content}, std::span<const unsigned char>{digest})
      .run();
}

base::Outcome<void> verify_chain(Record::Connection& connection, const std::string& path) {
  Digest before{};
  Statement seals{connection.handle(), "SELECT run, previous, content, digest FROM seal ORDER BY id"};
  while (seals.step()) {
    const RunId run = seals.integer(0);
    const std::string name = "run " + base::print_integer(run);
    Digest previous{};
    Digest content{};
    Digest digest{};
    if (!to_digest(seals.bytes(1), previous) || !to_digest(seals.bytes(2), content) ||
        !to_digest(seals.bytes(3), digest) || previous != before ||
        chain_digest(previous, run, content) != digest) {
      return base::Refusal{path, "the chain of seals is broken at " + name +
                                     ": a seal was changed, removed or put in. Compare with a copy"};
    }
    if (content_of(connection, run) != content) {
      return base::Refusal{
          path, name + " is not what was sealed: its rows were changed afterwards. Compare with a copy"};
    }
    before = digest;
  }
  return {};
}

}  // namespace loadstair::store
