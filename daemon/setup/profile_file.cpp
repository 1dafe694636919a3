#include "daemon/setup/profile_file.h"

#include <filesystem>

#include "daemon/setup/reading.h"
#include "embedded/built_in_profiles.h"

namespace loadstair::setup {
namespace {

using document::Choice;
using document::ObjectReader;
using document::print_text;
using document::Problem;
using document::Type;
using document::Value;
using instrument::Profile;
using instrument::ProfileQuery;
using instrument::ProfileSafe;
using instrument::ProfileSetting;
using instrument::ProfileValue;

enum class Speech { scpi, text_lines, none };
constexpr std::array kSpeeches = {Choice<Speech>{"scpi", Speech::scpi},
                                  Choice<Speech>{"text-lines", Speech::text_lines},
                                  Choice<Speech>{"none", Speech::none}};
// SCPI-1999 says 9.9e37; some say more.
constexpr double kLargestSentinel = 1e300;
constexpr std::string_view kSuffix = ".profile.json";

void refuse_key(ObjectReader& reader, std::string_view key, std::string_view why) {
  if (reader.has(key)) reader.complain(key, print_text(key) + " has no meaning here: " + std::string{why});
}

void read_value(ObjectReader& reader, Speech speech, Profile& profile) {
  ProfileValue value;
  value.name = reader.text("name", "\"name\": \"voltage\"");
  require_new(reader, "name", value.name, names_of(profile.values));
  value.unit = plain_unit(reader, "unit", reader.text("unit", "\"unit\": \"V\""));
  if (speech == Speech::text_lines) {
    value.line_pattern = reader.text("line_pattern", "\"line_pattern\": \"{value} {unit}\"");
    if (value.line_pattern.find("{value}") == std::string::npos) {
      reader.complain("line_pattern",
                      "the pattern has no {value}; it marks where the number stands in the line");
    }
  } else {
    refuse_key(reader, "line_pattern",
               "this instrument is asked; a pattern belongs to dialect \"text-lines\"");
  }
  profile.values.push_back(std::move(value));
}

void read_query(ObjectReader& reader, Profile& profile) {
  ProfileQuery query;
  query.text = reader.text("text", "\"text\": \"MEAS:VOLT:DC?\"");
  if (query.text.find('?') == std::string::npos) {
    reader.complain("text", "the query " + print_text(query.text) + " has no ?, so nothing will answer it");
  }
  (void)reader.required("values", Type::list, "\"values\": [\"voltage\"]");
  query.values = reader.texts_or_empty("values");
  const auto known = names_of(profile.values);
  for (std::size_t i = 0; i < query.values.size() && !reader.problem().found(); ++i) {
    const std::string& name = query.values[i];
    if (name.empty()) continue;
    const document::Place place = reader.find("values")->items[i].place;
    if (!contains(known, name)) {
      reader.problem().report(place,
                              "there is no value " + print_text(name) + document::suggest(name, known));
    }
    for (const ProfileQuery& other : profile.queries) {
      if (std::find(other.values.begin(), other.values.end(), name) == other.values.end()) continue;
      reader.problem().report(place, "the value " + print_text(name) + " is asked twice, by " +
                                         print_text(other.text) +
                                         " too; leave one of them out, or skip the field with \"\"");
    }
  }
  profile.queries.push_back(std::move(query));
}

// A value that no query asks for would never come.
void check_asked(ObjectReader& top, const Profile& profile) {
  const Value* values = top.find("values");
  for (std::size_t i = 0; i < profile.values.size(); ++i) {
    const bool asked =
        std::any_of(profile.queries.begin(), profile.queries.end(), [&](const ProfileQuery& query) {
          return std::find(query.values.begin(), query.values.end(), profile.values[i].name) !=
                 query.values.end();
        });
    if (asked) continue;
    top.problem().report(values->items[i].place, "no query asks for the value " +
                                                     print_text(profile.values[i].name) +
                                                     "; add one to \"queries\", or remove the value");
  }
}

void read_setting(ObjectReader& reader, Profile& profile) {
  ProfileSetting setting;
  setting.name = reader.text("name", "\"name\": \"power\"");
  require_new(reader, "name", setting.name, names_of(profile.settings));
  if (reader.has("unit")) setting.unit = plain_unit(reader, "unit", reader.text_or("unit", ""));
  setting.command = reader.text("command", "\"command\": \"SOUR:POW {value}\"");
  if (setting.command.find("{value}") == std::string::npos) {
    reader.complain("command", "the command has no {value}; it marks where the number goes");
  }
  setting.readback = reader.text_or("readback", "");
  if (!setting.readback.empty() && setting.readback.find('?') == std::string::npos) {
    reader.complain("readback",
                    "the query " + print_text(setting.readback) + " has no ?, so nothing will answer it");
  }
  setting.tolerance = reader.number_or("tolerance", document::kNotNegative, 0.0);
  profile.settings.push_back(std::move(setting));
}

void read_safe(ObjectReader& top, Profile& profile) {
  const Value* value = top.maybe("safe", Type::object);
  if (value == nullptr) return;
  ObjectReader reader{*value, kProfileSafeForm, top.problem()};
  ProfileSafe safe;
  (void)reader.required("commands", Type::list, "\"commands\": [\"OUTP OFF\"]");
  safe.commands = reader.texts_or_empty("commands");
  if (safe.commands.empty()) {
    reader.complain("commands", "a safe state needs at least one command, for example [\"OUTP OFF\"]");
  }
  safe.confirm_query = reader.text_or("confirm_query", "");
  safe.confirm_reply = reader.text_or("confirm_reply", "");
  if (safe.confirm_query.empty() != safe.confirm_reply.empty()) {
    reader.complain(safe.confirm_query.empty() ? "confirm_reply" : "confirm_query",
                    "\"confirm_query\" and \"confirm_reply\" go together; add the other one");
  }
  profile.safe = std::move(safe);
}

void read_function(ObjectReader& top, Profile& profile) {
  profile.function_query = top.text_or("function_query", "");
  profile.function_reply = top.text_or("function_reply", "");
  if (profile.function_query.empty() != profile.function_reply.empty()) {
    top.complain(profile.function_query.empty() ? "function_reply" : "function_query",
                 "\"function_query\" and \"function_reply\" go together; add the other one");
  } else if (!profile.function_query.empty() && profile.function_query.find('?') == std::string::npos) {
    top.complain("function_query",
                 "the query " + print_text(profile.function_query) + " has no ?, so nothing will answer it");
  }
}

void read_scpi(ObjectReader& top, Profile& profile) {
  for_objects(top, "values", kProfileValueForm,
              [&](ObjectReader& reader, std::size_t) { read_value(reader, Speech::scpi, profile); });
  for_objects(top, "queries", kProfileQueryForm,
              [&](ObjectReader& reader, std::size_t) { read_query(reader, profile); });
  if (!top.problem().found()) check_asked(top, profile);
  for_objects(top, "settings", kProfileSettingForm,
              [&](ObjectReader& reader, std::size_t) { read_setting(reader, profile); });
  profile.identity_query = top.text_or("identity_query", "*IDN?");
  profile.start_commands = top.texts_or_empty("start_commands");
  read_function(top, profile);
  profile.on_commands = top.texts_or_empty("on_commands");
  read_safe(top, profile);
}

void read_text_lines(ObjectReader& top, Profile& profile) {
  for (const auto key : {"identity_query", "queries", "settings", "start_commands", "function_query",
                         "function_reply", "on_commands", "safe"}) {
    refuse_key(top, key, "an instrument of dialect \"text-lines\" is only listened to");
  }
  profile.identity_query.clear();
  (void)top.required(
      "values", Type::list,
      "\"values\": [{\"name\": \"reading\", \"unit\": \"V\", \"line_pattern\": \"{value} {unit}\"}]");
  for_objects(top, "values", kProfileValueForm,
              [&](ObjectReader& reader, std::size_t) { read_value(reader, Speech::text_lines, profile); });
}

void read_silent(ObjectReader& top, Profile& profile) {
  for (const auto key : {"terminator", "identity_query", "start_commands", "function_query", "function_reply",
                         "values", "queries", "overload_words", "overload_at", "timeout_s", "settings",
                         "on_commands", "safe", "free_running"}) {
    refuse_key(top, key, "with dialect \"none\" nothing is said and nothing is heard");
  }
  profile.identity_query.clear();
}

Profile read_top(const Value& document, Problem& problem) {
  Profile profile;
  ObjectReader top{document, kProfileForm, problem};
  if (problem.found()) return profile;
  read_format(top);
  profile.name = top.text("profile", "\"profile\": \"my-meter\"");
  const auto speech = top.one_of<Speech>("dialect", kSpeeches);
  if (problem.found()) return profile;
  profile.dialect = speech == Speech::scpi ? instrument::Dialect::scpi : instrument::Dialect::text_lines;
  if (speech == Speech::none) {
    read_silent(top, profile);
    return profile;
  }
  if (top.has("terminator")) {
    const std::string written = top.text_or("terminator", "");
    if (written != "\n" && written != "\r\n" && written != "\r")
      top.complain("terminator", R"("terminator" must be "\n", "\r\n" or "\r")");
    profile.terminator = written;
  }
  if (speech == Speech::scpi) read_scpi(top, profile);
  if (speech == Speech::text_lines) read_text_lines(top, profile);
  profile.overload_words = top.texts_or_empty("overload_words");
  profile.overload_at = top.number_or("overload_at", {0.0, kLargestSentinel, true}, profile.overload_at);
  profile.timeout_s = top.number_or("timeout_s", {0.0, 60.0, true}, profile.timeout_s);
  profile.free_running = top.flag_or("free_running", profile.free_running);
  return profile;
}

std::string_view short_name(std::string_view path) {
  path.remove_prefix(path.rfind('/') + 1);
  path.remove_suffix(kSuffix.size());
  return path;
}

}  // namespace

base::Outcome<Profile> read_profile(std::string_view text, const std::string& file) {
  const auto document = document::parse(text, file);
  if (!document) return document.refusal();
  Problem problem{file};
  Profile profile = read_top(*document, problem);
  if (problem.found()) return problem.refusal();
  profile.text = std::string{text};
  return profile;
}

std::vector<std::string_view> built_in_profile_names() {
  std::vector<std::string_view> names;
  for (const auto& file : embedded::built_in_profiles()) names.push_back(short_name(file.name));
  std::sort(names.begin(), names.end());
  return names;
}

base::Outcome<Profile> find_profile(const std::string& name, const std::string& hookup_file) {
  if (name.ends_with(".json")) {
    const std::string path = (std::filesystem::path{hookup_file}.parent_path() / name).string();
    const auto text = load_text(path, "the profile file " + print_text(name));
    if (!text)
      return base::Refusal{"", text.refusal().reason + " (it is looked for beside the hook-up file)"};
    return read_profile(*text, path);
  }
  for (const auto& file : embedded::built_in_profiles()) {
    if (short_name(file.name) != name) continue;
    auto profile = read_profile(file.text, std::string{file.name});
    base::require(profile.ok(), "a built-in profile can be read");
    return profile;
  }
  const auto known = built_in_profile_names();
  return base::Refusal{"", "there is no built-in profile " + print_text(name) +
                               document::suggest(name, known) +
                               " (a profile of your own is named by its file: \"my-meter.profile.json\")"};
}

bool has_conversation(const Profile& profile) {
  return !profile.values.empty() || !profile.settings.empty() || profile.safe.has_value() ||
         !profile.start_commands.empty();
}

}  // namespace loadstair::setup
