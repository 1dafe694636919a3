#include "daemon/setup/hookup_parts.h"
#include "daemon/setup/profile_file.h"
#include "daemon/setup/reading.h"

namespace loadstair::setup {
namespace {

using document::Choice;
using document::kPositive;
using document::ObjectReader;
using document::print_text;
using document::Type;

constexpr auto word(std::string_view text) {
  return Choice<std::string_view>{text, text};
}
constexpr std::array kRoles = {word("source"), word("load"), word("converter")};
constexpr std::array kBankKinds = {word("lamp"), word("resistor")};
constexpr std::array kRehearsedKinds = {word("inverter"), word("dcdc")};
constexpr std::array kSenses = {word("peak"), word("rms"), word("average")};

void read_at_start(ObjectReader& reader, const Instrument& instrument, Control& control) {
  const auto* section = reader.maybe("at_start", Type::object);
  if (section == nullptr) return;
  const auto settings = names_of(instrument.profile.settings);
  for (const document::Member& member : section->members) {
    if (!contains(settings, member.name)) {
      reader.problem().report(member.place, "the profile " + print_text(instrument.profile_name) +
                                                " has no setting " + print_text(member.name) +
                                                document::suggest(member.name, settings));
    } else if (member.value.type != Type::number) {
      reader.problem().report(member.value.place, "the setting " + print_text(member.name) + " is a number");
    }
    control.at_start.emplace_back(member.name, member.value.number);
  }
}

void read_control(ObjectReader& reader, Hookup& hookup) {
  Control control;
  control.name = reader.text("name", "\"name\": \"load\"");
  require_new(reader, "name", control.name, names_of(hookup.controls));
  control.instrument = reader.text("instrument", "\"instrument\": \"ac load\"");
  require_known(reader, "instrument", "instrument", control.instrument, names_of(hookup.instruments));
  control.role = std::string{reader.one_of<std::string_view>("role", kRoles)};
  if (reader.problem().found()) return;
  const Instrument& instrument = *hookup.find_instrument(control.instrument);
  if (!instrument.profile.safe) {
    reader.complain("instrument",
                    "the profile " + print_text(instrument.profile_name) + " of " +
                        print_text(control.instrument) +
                        " says no \"safe\" commands, so it could not be switched off; it can be a "
                        "meter, not a control");
  }
  for (const Control& other : hookup.controls) {
    if (other.instrument != control.instrument) continue;
    reader.complain("instrument", "the control " + print_text(other.name) + " already is this instrument");
  }
  read_at_start(reader, instrument, control);
  hookup.controls.push_back(std::move(control));
}

void read_load(ObjectReader& reader, Hookup& hookup) {
  BankItem item;
  item.name = reader.text("name", "\"name\": \"lamp 60 W\"");
  require_new(reader, "name", item.name, names_of(hookup.loads));
  item.kind = std::string{reader.one_of<std::string_view>("kind", kBankKinds)};
  item.power_w = reader.number("power_w", kPositive, "\"power_w\": 60");
  item.voltage_v = reader.number("voltage_v", kPositive, "\"voltage_v\": 230");
  item.cold_ratio = reader.number_or("cold_ratio", {0.0, 1.0, true}, 1.0);
  item.count = reader.integer_or("count", 1, 1000, 1);
  hookup.loads.push_back(std::move(item));
}

void read_temperature(ObjectReader& reader, Hookup& hookup) {
  std::vector<std::string_view> temperatures;
  for (const Channel& channel : hookup.channels) {
    if (channel.quantity == Quantity::temperature) temperatures.push_back(channel.name);
  }
  TemperaturePoint point;
  point.channel = reader.text("channel", "\"channel\": \"heatsink\"");
  require_known(reader, "channel", "temperature channel", point.channel, temperatures);
  point.place = reader.text_or("place", point.channel);
  point.ambient_channel = reader.text_or("ambient", "");
  if (reader.has("ambient")) {
    require_known(reader, "ambient", "temperature channel", point.ambient_channel, temperatures);
    if (point.ambient_channel == point.channel) {
      reader.complain("ambient", "the rise over itself is always 0; name the channel that measures the air");
    }
  }
  hookup.temperatures.push_back(std::move(point));
}

// A column by its header's name, or by its number from 1.
std::string read_column(ObjectReader& reader, std::string_view key) {
  const auto* value = reader.find(key);
  if (value == nullptr) return {};
  if (value->type == Type::text && !value->text.empty()) return value->text;
  if (value->type == Type::number && value->number >= 1.0 && value->text.find('.') == std::string::npos) {
    return value->text;
  }
  reader.complain(
      key, print_text(key) + " names a column by its header, such as \"CH1\", or by its number from 1");
  return {};
}

// An error of the voltage's or the current's column without the column says which of the two was forgotten.
void refuse_lonely_errors(ObjectReader& reader, const CaptureSource& capture) {
  const auto refuse = [&](bool there, std::string_view column, std::initializer_list<std::string_view> keys) {
    for (const auto key : keys) {
      if (there || !reader.has(key)) continue;
      reader.complain(key, print_text(key) + " belongs to the column of the " + std::string{column} +
                               ", but no \"" + std::string{column} + "\" is named; add it, or remove this");
    }
  };
  refuse(!capture.voltage_column.empty(), "voltage",
         {"voltage_offset_v", "voltage_bandwidth_hz", "voltage_linearity_percent"});
  refuse(!capture.current_column.empty(), "current",
         {"current_offset_a", "current_bandwidth_hz", "current_linearity_percent", "current_delay_s",
          "deskewed", "phase_tolerance_deg"});
}

void read_capture_errors(ObjectReader& reader, CaptureSource& capture) {
  // A second between two probes is a slip of the unit.
  constexpr document::Bounds kDelay{-1.0, 1.0};
  constexpr document::Bounds kPercent{0.0, 100.0};
  capture.voltage_offset_v = reader.number_or("voltage_offset_v", document::kNotNegative, 0.0);
  capture.current_offset_a = reader.number_or("current_offset_a", document::kNotNegative, 0.0);
  capture.voltage_bandwidth_hz = reader.maybe_number("voltage_bandwidth_hz", kPositive);
  capture.current_bandwidth_hz = reader.maybe_number("current_bandwidth_hz", kPositive);
  capture.voltage_linearity_percent = reader.number_or("voltage_linearity_percent", kPercent, 0.0);
  capture.current_linearity_percent = reader.number_or("current_linearity_percent", kPercent, 0.0);
  capture.current_delay_s = reader.number_or("current_delay_s", kDelay, 0.0);
  capture.delay_tolerance_s = reader.number_or("delay_tolerance_s", {0.0, 1.0}, 0.0);
  capture.deskewed = read_date(reader, "deskewed");
  capture.phase_tolerance_deg = reader.number_or("phase_tolerance_deg", {0.0, 90.0}, 0.0);
  // A thousandth: any crystal is better, and a larger number is parts per billion.
  capture.timebase_ppm = reader.number_or("timebase_ppm", {0.0, 1000.0}, 0.0);
  capture.crest_band_hz = reader.maybe_number("crest_band_hz", kPositive);
  refuse_lonely_errors(reader, capture);
}

void read_capture(ObjectReader& reader, Hookup& hookup) {
  CaptureSource capture;
  capture.instrument = reader.text("instrument", "\"instrument\": \"scope\"");
  require_known(reader, "instrument", "instrument", capture.instrument, names_of(hookup.instruments));
  capture.port = reader.text("port", "\"port\": \"output\"");
  require_known(reader, "port", "port", capture.port, names_of(hookup.ports));
  if (reader.problem().found()) return;
  if (hookup.find_instrument(capture.instrument)->link.kind != LinkKind::folder) {
    reader.complain("instrument", "captures come as files, so " + print_text(capture.instrument) +
                                      " needs \"link\": {\"folder\": ...}");
  }
  capture.voltage_column = read_column(reader, "voltage");
  capture.current_column = read_column(reader, "current");
  if (capture.voltage_column.empty() && capture.current_column.empty()) {
    reader.problem().report(reader.place(),
                            "a capture needs \"voltage\" or \"current\", the columns in its file");
  }
  capture.voltage_scale = reader.number_or("voltage_scale", document::kAnyNumber, 1.0);
  capture.current_scale = reader.number_or("current_scale", document::kAnyNumber, 1.0);
  for (const auto key : {"voltage_scale", "current_scale"}) {
    if (reader.number_or(key, document::kAnyNumber, 1.0) == 0.0) {
      reader.complain(key, print_text(key) + " is 0; every sample would become 0");
    }
  }
  capture.voltage_gain_percent = reader.number_or("voltage_gain_percent", {0.0, 100.0}, 0.0);
  capture.current_gain_percent = reader.number_or("current_gain_percent", {0.0, 100.0}, 0.0);
  read_capture_errors(reader, capture);
  hookup.captures.push_back(std::move(capture));
}

std::map<std::string, double> read_numbers(ObjectReader& rehearsal, std::string_view key,
                                           const document::Form& form) {
  std::map<std::string, double> numbers;
  const auto* section = rehearsal.maybe(key, Type::object);
  if (section == nullptr) return numbers;
  ObjectReader reader{*section, form, rehearsal.problem()};
  if (rehearsal.problem().found()) return numbers;
  for (const document::Member& member : section->members) {
    numbers[member.name] = reader.number_or(member.name, document::kAnyNumber, 0.0);
  }
  return numbers;
}

}  // namespace

void read_bench_parts(ObjectReader& top, Hookup& hookup) {
  for_objects(top, "controls", kControlForm,
              [&](ObjectReader& reader, std::size_t) { read_control(reader, hookup); });
  for_objects(top, "loads", kLoadForm, [&](ObjectReader& reader, std::size_t) { read_load(reader, hookup); });
  for_objects(top, "temperatures", kTemperatureForm,
              [&](ObjectReader& reader, std::size_t) { read_temperature(reader, hookup); });
  for_objects(top, "captures", kCaptureForm,
              [&](ObjectReader& reader, std::size_t) { read_capture(reader, hookup); });
}

void read_rehearsal(ObjectReader& top, Hookup& hookup) {
  const auto* section = top.maybe("rehearsal", Type::object);
  if (section == nullptr) return;
  ObjectReader reader{*section, kRehearsalForm, top.problem()};
  if (top.problem().found()) return;
  RehearsalSection rehearsal;
  rehearsal.kind = std::string{reader.one_of<std::string_view>("kind", kRehearsedKinds, "inverter")};
  rehearsal.sense = std::string{reader.one_of<std::string_view>("sense", kSenses, "peak")};
  rehearsal.converter = read_numbers(reader, "converter", kRehearsedConverterForm);
  rehearsal.source = read_numbers(reader, "source", kRehearsedSourceForm);
  rehearsal.load = read_numbers(reader, "load", kRehearsedLoadForm);
  rehearsal.thermal = read_numbers(reader, "thermal", kRehearsedThermalForm);
  rehearsal.waveform = read_numbers(reader, "waveform", kRehearsedWaveformForm);
  rehearsal.meters = read_numbers(reader, "meters", kRehearsedMetersForm);
  rehearsal.person = read_numbers(reader, "person", kRehearsedPersonForm);
  hookup.rehearsal = std::move(rehearsal);
}

}  // namespace loadstair::setup
