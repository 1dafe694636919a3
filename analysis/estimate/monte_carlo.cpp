#include "analysis/estimate/monte_carlo.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <limits>
#include <numbers>
#include <string_view>
#include <utility>

#include "analysis/base/number.h"
#include "analysis/estimate/generator.h"

namespace loadstair::estimate {

namespace {

/// Draws are made in chunks of this many; chunk and source name the stream. A part of what makes a seed's
/// numbers: not to be changed.
constexpr std::size_t kChunk = 1000;
/// Beyond this Student's t is drawn as normal.
constexpr double kNormalFrom = 1e8;
constexpr std::uint64_t kChiStream = 0x6368692d73717561U;

struct Use {
  std::size_t input = 0;
  double contribution = 0;
};

/// A source, where it goes, and from which chi its t is made.
struct Drawn {
  SourcePtr source;
  std::vector<Use> uses;
  double degrees_of_freedom = 0;  ///< 0: not a t
  std::size_t sample = 0;         ///< index of its chi, where it is a t
};

struct Sample {
  std::string_view name;
  std::uint64_t stream = 0;
  double degrees_of_freedom = 0;
};

/// Everything that is the same for all chunks.
struct Plan {
  std::vector<double> values;
  std::vector<Drawn> sources;
  std::vector<Sample> samples;
};

bool is_student(const Source& source) {
  return std::isfinite(source.degrees_of_freedom) && source.degrees_of_freedom < kNormalFrom &&
         (source.kind == Kind::type_a || source.distribution == Distribution::normal);
}

void add_sample(Plan& plan, Drawn& drawn) {
  const Source& source = *drawn.source;
  drawn.degrees_of_freedom = source.degrees_of_freedom;
  if (!source.sample.empty()) {
    for (std::size_t i = 0; i < plan.samples.size(); ++i) {
      Sample& sample = plan.samples[i];
      if (sample.name != source.sample) continue;
      sample.degrees_of_freedom = std::min(sample.degrees_of_freedom, source.degrees_of_freedom);
      drawn.sample = i;
      return;
    }
  }
  drawn.sample = plan.samples.size();
  // The stream of a common chi is named by the sample, so that it does not matter which sources are there.
  std::uint64_t stream = source.order;
  if (!source.sample.empty()) {
    stream = 0;
    for (const char c : source.sample) stream = mixed(stream ^ static_cast<unsigned char>(c));
  }
  plan.samples.push_back({source.sample, stream ^ kChiStream, source.degrees_of_freedom});
}

/// Standard deviation of what draw() gives: 1, but for rectangular draws, which save a multiplication.
double deviation_of_draw(const Source& source) {
  const bool rectangular = source.kind == Kind::type_b && source.distribution == Distribution::rectangular;
  return rectangular ? 1 / (2 * std::numbers::sqrt3) : 1;
}

base::Outcome<Plan> plan_for(std::span<const Estimate> inputs) {
  Plan plan;
  std::vector<std::pair<SourcePtr, Use>> all;
  for (std::size_t i = 0; i < inputs.size(); ++i) {
    plan.values.push_back(inputs[i].value());
    for (const Term& term : inputs[i].terms()) all.push_back({term.source, {i, term.contribution}});
  }
  std::stable_sort(all.begin(), all.end(),
                   [](const auto& a, const auto& b) { return before(*a.first, *b.first); });
  for (auto& [source, use] : all) {
    if (plan.sources.empty() || before(*plan.sources.back().source, *source)) {
      plan.sources.push_back({source, {}, 0, 0});
      if (!(source->degrees_of_freedom > 0)) {
        return base::Refusal{source->name, "its degrees of freedom are not above zero"};
      }
      if (is_student(*source)) add_sample(plan, plan.sources.back());
    }
    plan.sources.back().uses.push_back({use.input, use.contribution / deviation_of_draw(*source)});
  }
  return plan;
}

/// Draws of mean 0 (a t before its chi).
void draw(Generator& generator, const Source& source, std::span<double> out) {
  if (source.kind == Kind::type_a) return generator.normal(out);
  switch (source.distribution) {
    case Distribution::normal:
      return generator.normal(out);
    case Distribution::rectangular:
      return generator.centred(out);
    case Distribution::triangular: {
      std::array<double, kChunk> second{};
      generator.uniform(out);
      generator.uniform(std::span{second}.first(out.size()));
      const double root_six = std::sqrt(6.0);
      for (std::size_t i = 0; i < out.size(); ++i) out[i] = (out[i] + second[i] - 1) * root_six;
      return;
    }
    case Distribution::arcsine:
      generator.uniform(out);
      for (double& x : out) x = std::numbers::sqrt2 * std::sin(2 * std::numbers::pi * x);
      return;
  }
}

std::uint64_t stream_of(std::uint64_t seed, std::uint64_t name, std::size_t chunk) {
  return mixed(mixed(mixed(seed) ^ name) + chunk);
}

/// Working space of one thread.
struct Space {
  std::vector<std::vector<double>> inputs;
  std::vector<std::span<const double>> views;
  std::vector<std::vector<double>> chi;  ///< 1/sqrt(chi^2/nu) of every sample
  std::vector<double> draw;
};

Space space_for(const Plan& plan) {
  Space space;
  space.inputs.assign(plan.values.size(), std::vector<double>(kChunk));
  space.chi.assign(plan.samples.size(), std::vector<double>(kChunk));
  space.draw.resize(kChunk);
  return space;
}

/// Draws chunk number `chunk` and evaluates the model into out (at most kChunk long).
void run_chunk(const Plan& plan, const BlockModel& model, std::uint64_t seed, std::size_t chunk, Space& space,
               std::span<double> out) {
  for (std::size_t i = 0; i < plan.values.size(); ++i) {
    std::fill(space.inputs[i].begin(), space.inputs[i].end(), plan.values[i]);
  }
  for (std::size_t i = 0; i < plan.samples.size(); ++i) {
    Generator generator{stream_of(seed, plan.samples[i].stream, chunk)};
    generator.chi_squared_per_freedom(plan.samples[i].degrees_of_freedom, space.chi[i]);
    for (double& x : space.chi[i]) x = 1 / std::sqrt(x);
  }
  for (const Drawn& drawn : plan.sources) {
    Generator generator{stream_of(seed, drawn.source->order, chunk)};
    draw(generator, *drawn.source, space.draw);
    if (drawn.degrees_of_freedom > 0) {
      const std::vector<double>& chi = space.chi[drawn.sample];
      for (std::size_t j = 0; j < kChunk; ++j) space.draw[j] *= chi[j];
    }
    for (const Use& use : drawn.uses) {
      double* __restrict const into = space.inputs[use.input].data();
      const double* __restrict const from = space.draw.data();
      for (std::size_t j = 0; j < kChunk; ++j) into[j] += use.contribution * from[j];
    }
  }
  space.views.clear();
  for (const std::vector<double>& input : space.inputs) {
    space.views.push_back(std::span{input}.first(out.size()));
  }
  model(space.views, out);
}

/// Mean and standard deviation, two passes.
void moments(std::span<const double> draws, MonteCarlo& out) {
  const auto count = static_cast<double>(draws.size());
  double sum = 0;
  for (const double x : draws) sum += x - draws[0];
  out.mean = draws[0] + sum / count;
  double squares = 0;
  for (const double x : draws) squares += (x - out.mean) * (x - out.mean);
  out.standard_deviation = std::sqrt(squares / (count - 1));
}

/// The least and the greatest of many numbers, in ascending order.
struct Tails {
  std::vector<double> low;
  std::vector<double> high;
};

/// So many of each. A sorted sample tells about where the tails begin; one pass collects a little more than
/// them, and only that is sorted.
Tails tails_of(std::span<const double> draws, std::size_t tail) {
  constexpr std::size_t kEvery = 64;
  std::vector<double> sample;
  sample.reserve(draws.size() / kEvery + 1);
  for (std::size_t i = 0; i < draws.size(); i += kEvery) sample.push_back(draws[i]);
  std::sort(sample.begin(), sample.end());
  const auto many = static_cast<double>(sample.size());
  const double share = static_cast<double>(tail) / static_cast<double>(draws.size());
  const auto rank = static_cast<std::size_t>(many * share + 5 * std::sqrt(many * share * (1 - share))) + 1;
  Tails out;
  if (2 * rank < sample.size()) {
    const double below = sample[rank];
    const double above = sample[sample.size() - 1 - rank];
    for (const double x : draws) {
      if (x <= below) out.low.push_back(x);
      if (x >= above) out.high.push_back(x);
    }
  }
  if (out.low.size() < tail || out.high.size() < tail) {
    out.low.assign(draws.begin(), draws.end());
    out.high = out.low;
  }
  std::sort(out.low.begin(), out.low.end());
  out.low.resize(tail);
  std::sort(out.high.begin(), out.high.end());
  out.high.erase(out.high.begin(), out.high.end() - static_cast<std::ptrdiff_t>(tail));
  return out;
}

/// Both intervals, from the tails of the draws.
/// Source: JCGM 101:2008 7.7 (q = integer part of p M + 1/2; shortest: least y_(r+q) - y_(r)).
void intervals(std::span<const double> draws, MonteCarlo& out) {
  const std::size_t count = draws.size();
  const auto covered =
      std::min(count - 1, static_cast<std::size_t>(std::floor(out.level * static_cast<double>(count) + 0.5)));
  // Draw number r and number r + covered enclose the level; r = 0 .. tail - 1.
  const std::size_t tail = count - covered;
  const Tails tails = tails_of(draws, tail);
  const std::size_t middle = (tail - 1) / 2;
  out.symmetric = {tails.low[middle], tails.high[middle]};
  std::size_t best = 0;
  for (std::size_t r = 1; r < tail; ++r) {
    if (tails.high[r] - tails.low[r] < tails.high[best] - tails.low[best]) best = r;
  }
  out.shortest = {tails.low[best], tails.high[best]};
}

base::Refusal no_value() {
  return {"Monte Carlo",
          "the model has no finite value at some draws: its inputs reach beyond where it holds"};
}

BlockModel in_blocks(const Model& model, std::size_t inputs) {
  return [&model, row = std::vector<double>(inputs)](std::span<const std::span<const double>> columns,
                                                     std::span<double> result) mutable {
    for (std::size_t j = 0; j < result.size(); ++j) {
      for (std::size_t i = 0; i < row.size(); ++i) row[i] = columns[i][j];
      result[j] = model(row);
    }
  };
}

bool all_finite(std::span<const double> draws) {
  // One sum tells: an infinity or no-number makes it one; finite numbers that overflow are looked at again.
  double sum = 0;
  for (const double x : draws) sum += x - x;
  return sum == 0;
}

MonteCarlo summarised(std::vector<double> draws, double level, std::uint64_t seed, bool keep) {
  MonteCarlo out;
  out.level = level;
  out.draws = draws.size();
  out.seed = seed;
  moments(draws, out);
  intervals(draws, out);
  if (keep) {
    std::sort(draws.begin(), draws.end());
    out.sorted = std::move(draws);
  }
  return out;
}

/// What the adaptive procedure watches, block by block.
class Watched {
 public:
  void add(const MonteCarlo& block) {
    const auto draws = static_cast<double>(block.draws);
    const double shift = block.mean - mean_;
    squares_ += block.standard_deviation * block.standard_deviation * (draws - 1) +
                shift * shift * draws * draws_ / (draws + draws_);
    mean_ += shift * draws / (draws + draws_);
    draws_ += draws;
    blocks_.push_back({block.mean, block.standard_deviation, block.shortest.low, block.shortest.high});
  }

  /// Standard deviation of all draws, put together from the blocks (Chan, Golub and LeVeque 1983).
  [[nodiscard]] double standard_deviation() const { return std::sqrt(squares_ / (draws_ - 1)); }

  /// Twice the standard deviation of the mean of each figure over the blocks, the largest of them.
  [[nodiscard]] double twice_largest() const {
    const auto count = static_cast<double>(blocks_.size());
    double largest = 0;
    for (std::size_t k = 0; k < 4; ++k) {
      double mean = 0;
      for (const auto& block : blocks_) mean += block[k] / count;
      double squares = 0;
      for (const auto& block : blocks_) squares += (block[k] - mean) * (block[k] - mean);
      largest = std::max(largest, 2 * std::sqrt(squares / (count * (count - 1))));
    }
    return largest;
  }

 private:
  std::vector<std::array<double, 4>> blocks_;
  double draws_ = 0;
  double mean_ = 0;
  double squares_ = 0;
};

bool is_level(double level) {
  return level > 0 && level < 1;
}

/// Draws per block: max(J, 10^4), J the least number of at least 100/(1 - p), in whole chunks.
std::size_t block_length(double level) {
  const double least = std::max(std::ceil(100 / (1 - level)), 1e4);
  return static_cast<std::size_t>(std::ceil(least / static_cast<double>(kChunk))) * kChunk;
}

}  // namespace

base::Outcome<MonteCarlo> propagate_blocks(const BlockModel& model, std::span<const Estimate> inputs,
                                           const MonteCarloSettings& settings) {
  if (!is_level(settings.level)) return base::Refusal{"Monte Carlo", "the level is not between 0 and 1"};
  if (settings.draws < kChunk) return base::Refusal{"Monte Carlo", "fewer than 1000 draws show nothing"};
  auto plan = plan_for(inputs);
  if (!plan) return plan.refusal();
  Space space = space_for(*plan);
  std::vector<double> draws(settings.draws);
  for (std::size_t from = 0; from < draws.size(); from += kChunk) {
    const auto part = std::span{draws}.subspan(from, std::min(kChunk, draws.size() - from));
    run_chunk(*plan, model, settings.seed, from / kChunk, space, part);
    if (!all_finite(part)) return no_value();
  }
  return summarised(std::move(draws), settings.level, settings.seed, settings.keep_draws);
}

base::Outcome<MonteCarlo> propagate(const Model& model, std::span<const Estimate> inputs,
                                    const MonteCarloSettings& settings) {
  return propagate_blocks(in_blocks(model, inputs.size()), inputs, settings);
}

base::Outcome<MonteCarlo> propagate_blocks_adaptively(const BlockModel& model,
                                                      std::span<const Estimate> inputs,
                                                      const AdaptiveSettings& settings) {
  if (!is_level(settings.level)) return base::Refusal{"Monte Carlo", "the level is not between 0 and 1"};
  auto plan = plan_for(inputs);
  if (!plan) return plan.refusal();
  Space space = space_for(*plan);
  const std::size_t length = block_length(settings.level);
  const std::size_t most = std::max(settings.most_draws, 2 * length);
  std::vector<double> draws;
  Watched watched;
  bool stable = false;
  double tolerance = 0;
  while (!stable && draws.size() + length <= most) {
    const std::size_t from = draws.size();
    draws.resize(from + length);
    const auto block_draws = std::span{draws}.subspan(from);
    for (std::size_t at = 0; at < length; at += kChunk) {
      run_chunk(*plan, model, settings.seed, (from + at) / kChunk, space, block_draws.subspan(at, kChunk));
    }
    if (!all_finite(block_draws)) return no_value();
    MonteCarlo block;
    block.level = settings.level;
    block.draws = length;
    moments(block_draws, block);
    intervals(block_draws, block);
    watched.add(block);
    if (draws.size() < 2 * length) continue;
    tolerance = settings.tolerance_share *
                numerical_tolerance(watched.standard_deviation(), settings.significant_digits);
    stable = watched.twice_largest() <= tolerance;
  }
  MonteCarlo out = summarised(std::move(draws), settings.level, settings.seed, settings.keep_draws);
  out.stabilised = stable;
  out.tolerance = tolerance;
  return out;
}

base::Outcome<MonteCarlo> propagate_adaptively(const Model& model, std::span<const Estimate> inputs,
                                               const AdaptiveSettings& settings) {
  return propagate_blocks_adaptively(in_blocks(model, inputs.size()), inputs, settings);
}

double numerical_tolerance(double standard_uncertainty, int significant_digits) {
  if (!(standard_uncertainty > 0) || !std::isfinite(standard_uncertainty)) return 0;
  // The exponent after rounding to so many digits: 0.0996 to two digits is 10 x 10^-2.
  const std::string text = base::print_scientific(standard_uncertainty, std::max(0, significant_digits - 1));
  const auto mark = text.find('E');
  const auto exponent = base::parse_integer(std::string_view{text}.substr(mark + 1)).value_or(0);
  return 0.5 * std::pow(10.0, static_cast<double>(exponent - (significant_digits - 1)));
}

Validation validate(const Coverage& linear, const MonteCarlo& found, int significant_digits) {
  Validation out;
  const double u = linear.standard_uncertainty > 0 ? linear.standard_uncertainty : found.standard_deviation;
  out.tolerance = numerical_tolerance(u, significant_digits);
  out.low_difference = std::abs(linear.low - found.shortest.low);
  out.high_difference = std::abs(linear.high - found.shortest.high);
  out.agrees =
      found.stabilised && out.low_difference <= out.tolerance && out.high_difference <= out.tolerance;
  return out;
}

Coverage reported(const Coverage& linear, const MonteCarlo& found, const Validation& validation) {
  if (validation.agrees) return linear;
  Coverage out;
  out.value = found.mean;
  out.low = found.shortest.low;
  out.high = found.shortest.high;
  out.standard_uncertainty = found.standard_deviation;
  out.degrees_of_freedom = std::numeric_limits<double>::infinity();
  out.level = found.level;
  out.method = CoverageMethod::monte_carlo;
  return out;
}

}  // namespace loadstair::estimate
