#include <chrono>

#include "analysis/base/number.h"
#include "daemon/setup/hookup_parts.h"
#include "daemon/setup/profile_file.h"
#include "daemon/setup/reading.h"

namespace loadstair::setup {
namespace {

using document::Choice;
using document::ObjectReader;
using document::print_text;
using document::Type;

constexpr std::array kIsolations = {
    Choice<Isolation>{"isolated", Isolation::isolated}, Choice<Isolation>{"battery", Isolation::battery},
    Choice<Isolation>{"earthed", Isolation::earthed}, Choice<Isolation>{"unknown", Isolation::unknown}};
constexpr std::array kParities = {Choice<std::string_view>{"none", "none"},
                                  Choice<std::string_view>{"even", "even"},
                                  Choice<std::string_view>{"odd", "odd"}};
// An hour: a longer period is a slip of the unit (milliseconds, say).
constexpr document::Bounds kPeriod{0.0, 3600.0, false};
constexpr document::Bounds kPositivePeriod{0.0, 3600.0, true};

// "host:port"; an IPv6 address stands in brackets.
void read_address(ObjectReader& reader, LinkChoice& link) {
  const std::string address = reader.text_or("tcp", "");
  const std::size_t colon = address.rfind(':');
  const std::int64_t port =
      colon == std::string::npos ? 0 : base::parse_integer(address.substr(colon + 1)).value_or(0);
  link.host = address.substr(0, colon);
  if (link.host.starts_with('[') && link.host.ends_with(']'))
    link.host = link.host.substr(1, link.host.size() - 2);
  if (link.host.empty() || port < 1 || port > 65535) {
    reader.complain("tcp",
                    "\"tcp\" is " + print_text(address) +
                        "; it must be host:port with a port from 1 to 65535, such as \"192.0.2.7:5025\"");
    return;
  }
  link.port = static_cast<int>(port);
}

void refuse_serial_keys(ObjectReader& reader) {
  for (const auto key : {"baud", "data_bits", "parity", "stop_bits"}) {
    if (reader.has(key)) {
      reader.complain(key,
                      print_text(key) + " belongs to a serial link; remove it here, or write \"serial\"");
    }
  }
}

LinkChoice read_link(ObjectReader& instrument) {
  LinkChoice link;
  const auto* value =
      instrument.required("link", Type::object, R"("link": {"serial": "/dev/ttyUSB0", "baud": 9600})");
  if (value == nullptr) return link;
  ObjectReader reader{*value, kLinkForm, instrument.problem()};
  if (reader.problem().found()) return link;
  const int kinds =
      (reader.has("serial") ? 1 : 0) + (reader.has("tcp") ? 1 : 0) + (reader.has("folder") ? 1 : 0);
  if (kinds != 1) {
    reader.problem().report(
        value->place,
        "a link names exactly one of \"serial\": a device, \"tcp\": host:port, \"folder\": a path");
    return link;
  }
  if (reader.has("serial")) {
    link.kind = LinkKind::serial;
    link.path = reader.text("serial", "\"serial\": \"/dev/ttyUSB0\"");
    link.baud = reader.integer_or("baud", 50, 4'000'000, 9600);
    link.data_bits = reader.integer_or("data_bits", 7, 8, 8);
    link.parity = std::string{reader.one_of<std::string_view>("parity", kParities, "none")};
    link.stop_bits = reader.integer_or("stop_bits", 1, 2, 1);
    return link;
  }
  refuse_serial_keys(reader);
  if (reader.has("tcp")) {
    link.kind = LinkKind::tcp;
    read_address(reader, link);
  } else {
    link.kind = LinkKind::folder;
    link.path = reader.text("folder", "\"folder\": \"captures\"");
  }
  return link;
}

bool same_place(const LinkChoice& a, const LinkChoice& b) {
  return a.kind == b.kind && a.path == b.path && a.host == b.host && a.port == b.port;
}

void check_link_free(ObjectReader& reader, const LinkChoice& link, const std::vector<Instrument>& others) {
  for (const Instrument& other : others) {
    if (!same_place(link, other.link)) continue;
    reader.complain("link", "this link is already that of instrument " + print_text(other.name) +
                                "; each instrument has its own");
  }
}

// A calendar date, ISO 8601: "2026-03-14".
std::optional<std::chrono::year_month_day> parse_date(const std::string& text) {
  if (text.size() != 10 || text[4] != '-' || text[7] != '-') return std::nullopt;
  const auto year = base::parse_integer(text.substr(0, 4));
  const auto month = base::parse_integer(text.substr(5, 2));
  const auto day = base::parse_integer(text.substr(8, 2));
  if (!year || !month || !day || *month < 0 || *day < 0) return std::nullopt;
  const std::chrono::year_month_day date{std::chrono::year{static_cast<int>(*year)},
                                         std::chrono::month{static_cast<unsigned>(*month)},
                                         std::chrono::day{static_cast<unsigned>(*day)}};
  return date.ok() ? std::optional{date} : std::nullopt;
}

void read_calibration(ObjectReader& reader, Instrument& one) {
  one.serial_number = reader.text_or("serial_number", "");
  one.calibrated = read_date(reader, "calibrated");
  one.calibration_due = read_date(reader, "calibration_due");
  // Dates in this form sort as texts do.
  if (!one.calibrated.empty() && !one.calibration_due.empty() && one.calibration_due <= one.calibrated) {
    reader.complain("calibration_due", "\"calibration_due\" " + one.calibration_due +
                                           " is not after \"calibrated\" " + one.calibrated +
                                           "; the two may be swapped");
  }
}

void read_profile_of(ObjectReader& reader, const Hookup& hookup, Instrument& one) {
  one.profile_name = reader.text("profile", "\"profile\": \"scpi-meter\"");
  if (reader.problem().found()) return;
  const auto kept = hookup.kept_profiles.find(one.profile_name);
  auto profile = kept != hookup.kept_profiles.end() ? read_profile(kept->second, one.profile_name)
                                                    : find_profile(one.profile_name, hookup.file);
  if (profile) {
    one.profile = *std::move(profile);
  } else if (profile.refusal().place.empty()) {
    reader.complain("profile", profile.refusal().reason);
  } else {
    reader.problem().keep(profile.refusal());
  }
}

void check_conversation(ObjectReader& reader, const Instrument& one) {
  const bool talks = has_conversation(one.profile);
  if (talks && one.link.kind == LinkKind::folder) {
    reader.complain("link",
                    "the profile " + print_text(one.profile_name) +
                        " talks to its instrument, which a folder cannot; write \"serial\" or \"tcp\"");
  }
  if (!talks && one.link.kind != LinkKind::folder) {
    reader.complain("link", "the profile " + print_text(one.profile_name) +
                                " only takes files from a folder; write \"link\": {\"folder\": ...}");
  }
}

void read_instrument(ObjectReader& reader, Hookup& hookup) {
  Instrument one;
  one.name = reader.text("name", "\"name\": \"shunt meter\"");
  require_new(reader, "name", one.name, names_of(hookup.instruments));
  read_profile_of(reader, hookup, one);
  one.link = read_link(reader);
  one.identity = reader.text_or("identity", "");
  one.isolation = reader.one_of<Isolation>("isolation", kIsolations, Isolation::unknown);
  one.poll_s = reader.number_or("poll_s", kPositivePeriod, 1.0);
  one.update_s = reader.number_or("update_s", kPeriod, 0.0);
  one.integration_s = reader.number_or("integration_s", kPeriod, 0.0);
  one.delay_s = reader.number_or("delay_s", kPeriod, 0.0);
  read_calibration(reader, one);
  if (reader.problem().found()) return;
  check_link_free(reader, one.link, hookup.instruments);
  check_conversation(reader, one);
  if (!one.identity.empty() && one.profile.identity_query.empty()) {
    reader.complain("identity", "the profile " + print_text(one.profile_name) +
                                    " asks for no identity, so this can never match; remove it");
  }
  hookup.instruments.push_back(std::move(one));
}

}  // namespace

std::string read_date(ObjectReader& reader, std::string_view key) {
  const std::string text = reader.text_or(key, "");
  if (reader.has(key) && !parse_date(text)) {
    reader.complain(key, print_text(key) + " is " + print_text(text) +
                             "; it must be a date as year-month-day, such as \"2026-03-14\"");
  }
  return text;
}

void read_instruments(ObjectReader& top, Hookup& hookup) {
  for_objects(top, "instruments", kInstrumentForm,
              [&](ObjectReader& reader, std::size_t) { read_instrument(reader, hookup); });
}

}  // namespace loadstair::setup
