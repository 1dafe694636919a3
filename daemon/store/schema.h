// The record's tables (schema 1) and what always holds of them. docs/record.md explains them to people who
// read a record with plain SQL.
//
// Invariants; tests quote the numbers.
//  R1  application_id is kApplicationId, user_version is the schema. A program never writes a newer schema.
//  R2  Instants are UTC nanoseconds: the run's utc_offset_ns plus the monotonic clock, so the order within a
//  run is
//      the bench's order whatever the wall clock did.
//  R3  A reply is stored once, as it came; the readings made from it name it. reply.id and reading.id grow
//  with time
//      of commit.
//  R4  reading.value is NULL exactly where the instrument gave no number; flags say why.
//  R5  A later typed answer for the same step, channel and round sets kSuperseded on the earlier ones; none
//  is
//      deleted.
//  R6  capture.complete is 1 when all chunks are there; their frames, decompressed in order of position, are
//  `size`
//      bytes with digest `sha256`. A chunk holds at most 1 MB of the file.
//  R7  Nothing of a sealed run is inserted, changed or deleted; amendments alone may be added.
//  R8  An amendment, a seal and a bench text are never changed or deleted.
//  R9  seal.digest = SHA-256(previous seal's digest, run number, content digest); the first one's previous
//  digest is
//      32 zero bytes.
//  R10 Every commit is on the disk (WAL, synchronous=FULL) before the writer calls it committed.
//  R11 owed_safe_state names a run from the commit that begins it until one says that the bench is safe. It
//  tells of
//      the bench, not of what was measured: no seal covers it.
#pragma once

#include <string>
#include <string_view>
#include <vector>

namespace loadstair::store {

inline constexpr int kApplicationId = 0x4c645374;  // "LdSt"

/// The statements that make an empty record of schema 1.
[[nodiscard]] std::string schema_1();

/// A table whose rows belong to a run, with its columns in the order in which a seal digests them.
struct SealedTable {
  std::string_view name, columns, order;
};
[[nodiscard]] const std::vector<SealedTable>& sealed_tables();

}  // namespace loadstair::store
