// Items into tables. Of this room only; runs on the writer's thread within its transaction.
#pragma once

#include <cstddef>
#include <cstdint>
#include <memory>
#include <string>
#include <unordered_map>

#include "daemon/store/connection.h"
#include "daemon/store/items.h"

namespace loadstair::store {

/// A capture of which not all chunks are in the record yet.
struct OpenCapture {
  std::int64_t id = 0;
  std::shared_ptr<const std::string> bytes;
  std::size_t offset = 0;
  std::int32_t position = 0;
};

class Inserter {
 public:
  Inserter(Record::Connection& connection, std::int64_t utc_offset_ns)
      : connection_{connection}, utc_offset_ns_{utc_offset_ns} {}

  /// Writes one item; throws SqlFault. A capture's first chunk goes in here; what is left is returned through
  /// `rest` when it is more.
  void insert(const Item& item, std::unique_ptr<OpenCapture>& rest);
  /// The next chunk of a capture. Returns: all are there.
  [[nodiscard]] bool insert_chunk(OpenCapture& capture);
  /// An event of the writer's own, in the run's or in no run's name.
  void insert_own_event(const std::string& text);
  /// A transaction was rolled back: what was remembered of it is forgotten.
  void forget();

 private:
  void insert_one(const RunBegin& item);
  void insert_one(const RunEnd& item);
  void insert_one(const StepUpdate& item);
  void insert_one(const ReplyItem& item);
  void insert_one(const TypedAnswer& item);
  void insert_one(const EventItem& item);
  void insert_one(const SettingItem& item);
  void insert_one(const PromptItem& item);
  void insert_one(const AmendmentItem& item);
  void insert_one(const BenchCheckItem& item);
  void insert_one(const SealItem& item);
  void insert_one(const SafeStateItem& item);
  std::unique_ptr<OpenCapture> insert_capture(const CaptureItem& item);

  [[nodiscard]] std::int64_t utc(RunId run, std::int64_t t_ns) const;
  [[nodiscard]] std::optional<std::int64_t> utc(RunId run, std::optional<std::int64_t> t_ns) const;
  std::int64_t text_id(const std::string& text);
  void require_run(RunId run);

  Record::Connection& connection_;
  std::int64_t utc_offset_ns_;
  std::unordered_map<RunId, std::int64_t> offsets_;  ///< runs that this writer began
  RunId known_run_ = 0;                              ///< the last one that was seen to exist
};

}  // namespace loadstair::store
