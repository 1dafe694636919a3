#include "daemon/setup/hookup.h"

#include <filesystem>

#include "daemon/setup/hookup_parts.h"
#include "daemon/setup/reading.h"

namespace loadstair::setup {
namespace {

using document::ObjectReader;
using document::Problem;
using document::Type;

template <class Named>
const Named* find_named(const std::vector<Named>& all, std::string_view name) {
  const auto at = std::find_if(all.begin(), all.end(), [&](const Named& one) { return one.name == name; });
  return at == all.end() ? nullptr : &*at;
}

void read_repeatability(ObjectReader& top, Hookup& hookup) {
  const document::Value* section = top.maybe("repeatability", Type::object);
  if (section == nullptr) return;
  const auto channels = names_of(hookup.channels);
  for (const document::Member& member : section->members) {
    Problem& problem = top.problem();
    if (!contains(channels, member.name)) {
      problem.report(member.place, "there is no channel " + document::print_text(member.name) +
                                       document::suggest(member.name, channels));
    } else if (member.value.type != Type::number || !(member.value.number > 0.0)) {
      problem.report(member.value.place, "a repeatability is a number of percent above 0, such as 0.02");
    }
    hookup.repeatability_percent[member.name] = member.value.number;
  }
}

// Asking for what no channel uses costs time on the line, and may click relays in the meter.
void keep_needed_queries(Hookup& hookup) {
  for (Instrument& one : hookup.instruments) {
    const auto needed = [&](const std::string& value) {
      return std::any_of(hookup.channels.begin(), hookup.channels.end(), [&](const Channel& channel) {
        return channel.instrument == one.name && channel.value == value;
      });
    };
    std::erase_if(one.profile.queries, [&](const instrument::ProfileQuery& query) {
      return std::none_of(query.values.begin(), query.values.end(), needed);
    });
  }
}

Hookup read_top(const document::Value& document, const std::string& file,
                const std::map<std::string, std::string>& profiles, Problem& problem) {
  Hookup hookup;
  hookup.file = file;
  hookup.kept_profiles = profiles;
  ObjectReader top{document, kHookupForm, problem};
  if (problem.found()) return hookup;
  read_format(top);
  hookup.bench = top.text("bench", "\"bench\": \"north bench\"");
  if (!problem.found()) read_instruments(top, hookup);
  if (!problem.found()) read_channels(top, hookup);
  if (!problem.found()) read_ports(top, hookup);
  if (!problem.found()) read_bench_parts(top, hookup);
  if (!problem.found()) read_repeatability(top, hookup);
  if (!problem.found()) read_rehearsal(top, hookup);
  keep_needed_queries(hookup);
  return hookup;
}

}  // namespace

const Channel* Hookup::find_channel(std::string_view name) const {
  return find_named(channels, name);
}
const Instrument* Hookup::find_instrument(std::string_view name) const {
  return find_named(instruments, name);
}
const Port* Hookup::find_port(std::string_view name) const {
  return find_named(ports, name);
}

std::string beside(const std::string& file, const std::string& path) {
  // An absolute path stays what it is.
  return (std::filesystem::path{file}.parent_path() / path).string();
}

base::Outcome<Hookup> read_hookup(std::string_view text, const std::string& file) {
  return read_hookup(text, file, {});
}

base::Outcome<Hookup> read_hookup(std::string_view text, const std::string& file,
                                  const std::map<std::string, std::string>& profiles) {
  const auto document = document::parse(text, file);
  if (!document) return document.refusal();
  Problem problem{file};
  Hookup hookup = read_top(*document, file, profiles, problem);
  if (problem.found()) return problem.refusal();
  hookup.text = std::string{text};
  return hookup;
}

base::Outcome<Hookup> load_hookup(const std::string& file) {
  const auto text = load_text(file, "the hook-up file");
  if (!text) return text.refusal();
  return read_hookup(*text, file);
}

}  // namespace loadstair::setup
