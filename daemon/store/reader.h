// Reading a record: lists of runs, and a run with all that its evaluation needs.
#pragma once

#include <cstdint>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "analysis/base/outcome.h"
#include "daemon/store/items.h"

namespace loadstair::store {

// All `_ns` instants here are UTC nanoseconds since 1970 (items.h).

struct RunSummary {
  RunId run = 0;
  std::string prototype, revision, unit;
  RunState state = RunState::running;
  std::int64_t started_ns = 0;
  std::optional<std::int64_t> ended_ns;
  std::string zone;
  std::int32_t steps = 0, steps_done = 0;
  bool sealed = false;
};

struct StoredStep {
  std::int32_t index = 0;
  std::string label;
  double load_w = 0.0;
  StepState state = StepState::waiting;
  std::optional<std::int64_t> begun_ns, soak_begin_ns, settle_begin_ns, average_begin_ns, average_end_ns,
      ended_ns;
  std::string settled_how;
  std::optional<std::int64_t> settled_ns;
  std::string reason;
};

/// The readings of one channel as columns of one length, in the order of their commit. value is NaN where the
/// instrument gave no number (flags say why).
struct StoredChannel {
  ChannelEntry entry;
  std::vector<std::int64_t> t_ns, half_width_ns;
  std::vector<double> value, range;
  std::vector<std::uint32_t> flags;
  std::vector<std::int64_t> reply;  ///< id of the reply
};

struct StoredTypedAnswer {
  std::int32_t step = 0, channel = 0, round = 1;
  std::int64_t prompted_ns = 0, entered_ns = 0;
  std::string text, unit;
  double value = 0.0, range = 0.0, last_digit = 0.0;
  std::uint32_t flags = 0;  ///< kSuperseded is set where a later answer took its place
};

struct StoredCapture {
  std::int64_t id = 0;
  std::int32_t step = 0;
  std::string file_name, instrument;
  std::int64_t t_ns = 0;
  std::string sha256;  ///< of the bytes, hexadecimal
  std::int64_t size = 0;
  std::string bytes;  ///< the file; empty when loaded without contents
};

struct StoredEvent {
  RunId run = 0;
  std::int64_t id = 0, t_ns = 0;
  std::string kind, source, text;
  std::optional<std::int64_t> utc_offset_before_ns, utc_offset_after_ns;
};

struct StoredSetting {
  std::int32_t step = 0;
  std::string control, setting;
  double value = 0.0;
  std::optional<double> read_back;
  std::int64_t t_ns = 0;
};

struct StoredPrompt {
  std::int32_t step = 0;
  std::string text, answer, by;
  std::int64_t prompted_ns = 0, answered_ns = 0;
};

struct StoredAmendment {
  std::string who, why, document, path, old_value, new_value;
  std::int64_t when_ns = 0;
};

struct StoredReply {
  std::int64_t id = 0;
  std::string instrument, query, text;
  std::int64_t sent_ns = 0, received_ns = 0;
};

struct StoredRun {
  RunSummary summary;
  std::int64_t utc_offset_ns = 0;
  std::uint64_t seed = 0;
  std::string program_version, method_version;
  std::string hookup_file, hookup_text, stair_file, stair_text;
  std::vector<NamedText> profiles;
  std::vector<StoredStep> steps;
  std::vector<StoredChannel> channels;
  std::vector<StoredTypedAnswer> typed;
  std::vector<StoredCapture> captures;
  std::vector<StoredEvent> events;
  std::vector<StoredSetting> settings;
  std::vector<StoredPrompt> prompts;
  std::vector<StoredAmendment> amendments;
  std::string end_reason;
};

/// How much of a run to load.
struct LoadOptions {
  bool captures = true;  ///< with their bytes
};

/// A read-only connection. Movable; one thread at a time. Each call is one short transaction: it sees one
/// state of the record and never holds up the writer.
class Reader {
 public:
  /// The runs, oldest first.
  [[nodiscard]] base::Outcome<std::vector<RunSummary>> list_runs() const;
  /// Refusal: no such run (the known ones are named), or the record cannot be read. A capture whose digest
  /// does not fit its bytes is a refusal too.
  [[nodiscard]] base::Outcome<StoredRun> load_run(RunId run, LoadOptions options = {}) const;
  [[nodiscard]] base::Outcome<std::vector<StoredReply>> load_replies(RunId run) const;
  /// Events of any run with an id above `after`, oldest first, at most `most`.
  [[nodiscard]] base::Outcome<std::vector<StoredEvent>> events(std::int64_t after, std::size_t most) const;
  /// Recomputes the seals: the chain is whole and every sealed run is what was sealed. Refusal: which run is
  /// not.
  [[nodiscard]] base::Outcome<void> verify_seals() const;

  Reader(Reader&&) noexcept;
  Reader& operator=(Reader&&) noexcept;
  ~Reader();

 private:
  friend class Record;
  struct State;
  explicit Reader(std::unique_ptr<State> state);
  std::unique_ptr<State> state_;
};

}  // namespace loadstair::store
