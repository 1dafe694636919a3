// Checks of the bench itself: zeros that are taken off, ties that make two meters one. Of this room only.
#pragma once

#include <optional>
#include <string>
#include <vector>

#include "analysis/estimate/tie.h"
#include "daemon/evaluation/channel_value.h"
#include "daemon/evaluation/result.h"
#include "daemon/setup/stair.h"

namespace loadstair::evaluation {

/// What a channel's meter showed at nothing, on one of its ranges; meter's unit.
struct ZeroOf {
  std::string channel;
  int range = kNoRange;
  estimate::ZeroCheck check;  ///< before and after; after is before where only one is known
  bool twice = false;         ///< both known: then the specification's offset is replaced
  [[nodiscard]] double mean() const { return (check.before.value() + check.after.value()) / 2.0; }
};

/// A channel held against a tie's first one, on one of its ranges.
struct TieOf {
  std::string channel, first;
  int range = kNoRange;
  estimate::Tie tie;
};

/// The checks that are used, and what is told of all.
struct BenchChecks {
  std::vector<ZeroOf> zeros;
  std::vector<TieOf> ties;
  std::vector<BenchCheckResult> results;

  [[nodiscard]] const ZeroOf* zero_of(const std::string& channel) const;
  [[nodiscard]] const TieOf* tie_of(const std::string& channel) const;
};

/// The windows of a run's steps, one per recorded step; nullopt where it has none.
using Windows = std::vector<std::optional<WindowContext>>;

/// Zeros first: they are taken off the tracks (readings on the range on which the zero was measured) before
/// the ties are evaluated with them. What is not usable is in `results` with its reason and in nothing else.
[[nodiscard]] BenchChecks bench_checks(const store::StoredRun& run, const setup::Hookup& hookup,
                                       const setup::Stair& stair, const Windows& windows,
                                       std::vector<Track>& tracks);

}  // namespace loadstair::evaluation
