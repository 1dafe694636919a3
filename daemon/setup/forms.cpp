#include "daemon/setup/forms.h"

#include <array>

namespace loadstair::setup {
namespace {

using document::Form;

// std::to_array keeps the keys countable without saying how many there are.
using std::to_array;
using Key = std::string_view;

constexpr auto kHookupKeys =
    to_array<Key>({"format", "bench", "instruments", "channels", "ports", "controls", "loads", "temperatures",
                   "captures", "repeatability", "rehearsal"});
constexpr auto kInstrumentKeys =
    to_array<Key>({"name", "profile", "link", "identity", "isolation", "poll_s", "update_s", "integration_s",
                   "delay_s", "serial_number", "calibrated", "calibration_due"});
constexpr auto kLinkKeys =
    to_array<Key>({"serial", "tcp", "folder", "baud", "data_bits", "parity", "stop_bits"});
constexpr auto kChannelKeys = to_array<Key>({"name", "typed", "instrument", "value", "quantity", "unit",
                                             "response", "conversion", "ranges", "band_hz", "crest_limit",
                                             "low", "high", "conditions", "phase_error_deg", "meter"});
constexpr auto kConditionsKeys = to_array<Key>({"low_c", "high_c", "percent_of_spec_per_k", "days",
                                                "least_percent_of_range", "least_hz", "least_power_factor"});
constexpr auto kConversionKeys =
    to_array<Key>({"scale", "scale_tolerance_percent", "shunt", "thermocouple", "platinum", "thermistor"});
constexpr auto kShuntKeys = to_array<Key>({"resistance_ohm", "tolerance_percent", "tempco_ppm_per_k",
                                           "rise_k_per_w", "ambient_c", "ambient_tolerance_k"});
constexpr auto kThermocoupleKeys = to_array<Key>({"letter", "tolerance_class", "cold_junction"});
constexpr auto kPlatinumKeys = to_array<Key>({"r0_ohm", "class", "build", "lead_ohm"});
constexpr auto kThermistorKeys = to_array<Key>({"r25_ohm", "beta_k", "a", "b", "c", "tolerance_k"});
constexpr auto kRangeKeys = to_array<Key>({"upto", "reading_percent", "range_percent", "digits", "resolution",
                                           "impedance_ohm", "impedance_tolerance_percent"});
constexpr auto kPortKeys =
    to_array<Key>({"name", "direction", "kind", "counted", "voltage", "current", "power", "power_factor",
                   "power_factor_low", "voltmeter", "sensed", "lead_resistance_ohm", "lead_tolerance_percent",
                   "ripple_current_rms_a", "source_resistance_ohm", "live"});
constexpr auto kControlKeys = to_array<Key>({"name", "instrument", "role", "at_start"});
constexpr auto kLoadKeys = to_array<Key>({"name", "kind", "power_w", "voltage_v", "cold_ratio", "count"});
constexpr auto kTemperatureKeys = to_array<Key>({"channel", "place", "ambient"});
constexpr auto kCaptureKeys = to_array<Key>({"instrument",
                                             "port",
                                             "voltage",
                                             "current",
                                             "voltage_scale",
                                             "current_scale",
                                             "voltage_gain_percent",
                                             "current_gain_percent",
                                             "voltage_offset_v",
                                             "current_offset_a",
                                             "voltage_bandwidth_hz",
                                             "current_bandwidth_hz",
                                             "voltage_linearity_percent",
                                             "current_linearity_percent",
                                             "current_delay_s",
                                             "delay_tolerance_s",
                                             "deskewed",
                                             "phase_tolerance_deg",
                                             "timebase_ppm",
                                             "crest_band_hz"});
constexpr auto kRehearsalKeys = to_array<Key>(
    {"kind", "sense", "converter", "source", "load", "thermal", "waveform", "meters", "person"});
constexpr auto kRehearsedConverterKeys =
    to_array<Key>({"no_load_w", "linear", "quadratic_per_w", "resistance_rise_per_k", "standby_w",
                   "output_voltage_v", "output_impedance_ohm", "soft_start_s", "sense_threshold_v",
                   "sense_ohm", "fold_back", "least_input_voltage_v"});
constexpr auto kRehearsedSourceKeys =
    to_array<Key>({"voltage_v", "resistance_ohm", "current_limit_a", "lead_ohm"});
constexpr auto kRehearsedLoadKeys = to_array<Key>({"lead_ohm", "greatest_current_a"});
constexpr auto kRehearsedThermalKeys =
    to_array<Key>({"ambient_c", "ambient_drift_k_per_h", "junction_to_case_k_per_w", "case_to_air_k_per_w",
                   "case_to_air_fan_k_per_w", "junction_time_s", "case_time_s", "fan_starts_c", "fan_stops_c",
                   "fan_power_w"});
constexpr auto kRehearsedWaveformKeys =
    to_array<Key>({"frequency_hz", "dc_offset_v", "third_share", "fifth_share", "seventh_share",
                   "residue_share", "residue_ratio", "ripple_share"});
constexpr auto kRehearsedMetersKeys = to_array<Key>({"noise_share"});
constexpr auto kRehearsedPersonKeys = to_array<Key>({"look_s", "type_s"});

constexpr auto kStairKeys =
    to_array<Key>({"format", "prototype", "ratings", "environment", "load_tolerance_percent", "staircase",
                   "steps", "checks", "limits", "decision", "overload", "guards", "end"});
constexpr auto kPrototypeKeys = to_array<Key>({"name", "revision", "unit"});
constexpr auto kRatingsKeys =
    to_array<Key>({"input_voltage_v", "output_voltage_v", "output_power_w", "output_frequency_hz",
                   "highest_ambient_c", "expected_efficiency_percent"});
constexpr auto kOverloadKeys = to_array<Key>(
    {"sense", "threshold_v", "sense_ohm", "threshold_tolerance_percent", "sense_tolerance_percent"});
constexpr auto kEnvironmentKeys = to_array<Key>({"ambient_c"});
constexpr auto kStaircaseKeys =
    to_array<Key>({"control", "setting", "prompt", "hand_action", "levels_percent", "levels_w",
                   "input_voltages_v", "input_control", "soak_s", "settle", "average_s", "capture"});
constexpr auto kStepKeys = to_array<Key>({"label", "load_w", "input_voltage_v", "set", "prompt",
                                          "hand_action", "soak_s", "settle", "average_s", "capture"});
constexpr auto kSetPointKeys = to_array<Key>({"control", "setting", "value"});
constexpr auto kSettleKeys = to_array<Key>({"electrical", "thermal", "limit_s"});
constexpr auto kElectricalKeys = to_array<Key>({"channel", "slope_percent_per_min", "window_s"});
constexpr auto kThermalKeys =
    to_array<Key>({"channel", "change_k", "window_s", "count", "hold_s", "prediction"});
constexpr auto kPredictionKeys = to_array<Key>({"tolerance_k", "slowest_tau_s"});
constexpr auto kChecksKeys = to_array<Key>({"zero", "ties", "standby", "no_load", "closure"});
constexpr auto kZeroKeys = to_array<Key>({"channels", "prompt", "restore", "hand_action", "restore_action",
                                          "soak_s", "average_s", "capture", "after"});
constexpr auto kTieKeys = to_array<Key>({"name", "channels", "prompt", "restore", "hand_action",
                                         "restore_action", "on", "levels", "soak_s", "average_s"});
constexpr auto kTieLevelKeys = to_array<Key>({"label", "set"});
constexpr auto kIdleKeys =
    to_array<Key>({"prompt", "hand_action", "set", "on", "soak_s", "settle", "average_s", "capture"});
constexpr auto kClosureKeys = to_array<Key>({"levels"});
constexpr auto kLimitKeys = to_array<Key>({"name", "quantity", "low", "high", "unit", "at", "table"});
constexpr auto kDecisionKeys = to_array<Key>({"guard_factor"});
constexpr auto kGuardKeys = to_array<Key>({"name", "channel", "above", "below", "debounce_s", "blanking_s",
                                           "action", "missing", "missing_after_s"});
constexpr auto kEndKeys = to_array<Key>({"cool_down_s", "discharge_s"});

constexpr auto kProfileKeys =
    to_array<Key>({"format", "profile", "dialect", "terminator", "identity_query", "start_commands",
                   "function_query", "function_reply", "values", "queries", "overload_words", "overload_at",
                   "timeout_s", "settings", "on_commands", "safe", "free_running"});
constexpr auto kProfileValueKeys = to_array<Key>({"name", "unit", "line_pattern"});
constexpr auto kProfileQueryKeys = to_array<Key>({"text", "values"});
constexpr auto kProfileSettingKeys = to_array<Key>({"name", "unit", "command", "readback", "tolerance"});
constexpr auto kProfileSafeKeys = to_array<Key>({"commands", "confirm_query", "confirm_reply"});

}  // namespace

const Form kHookupForm{"a hook-up file", kHookupKeys};
const Form kInstrumentForm{"an instrument", kInstrumentKeys};
const Form kLinkForm{"a link", kLinkKeys};
const Form kChannelForm{"a channel", kChannelKeys};
const Form kConditionsForm{"a set of conditions", kConditionsKeys};
const Form kConversionForm{"a conversion", kConversionKeys};
const Form kShuntForm{"a shunt", kShuntKeys};
const Form kThermocoupleForm{"a thermocouple", kThermocoupleKeys};
const Form kPlatinumForm{"a platinum thermometer", kPlatinumKeys};
const Form kThermistorForm{"a thermistor", kThermistorKeys};
const Form kRangeForm{"a range", kRangeKeys};
const Form kPortForm{"a port", kPortKeys};
const Form kControlForm{"a control", kControlKeys};
const Form kLoadForm{"a load", kLoadKeys};
const Form kTemperatureForm{"a temperature", kTemperatureKeys};
const Form kCaptureForm{"a capture", kCaptureKeys};
const Form kRehearsalForm{"a rehearsal", kRehearsalKeys};
const Form kRehearsedConverterForm{"a rehearsed converter", kRehearsedConverterKeys};
const Form kRehearsedSourceForm{"a rehearsed source", kRehearsedSourceKeys};
const Form kRehearsedLoadForm{"a rehearsed load", kRehearsedLoadKeys};
const Form kRehearsedThermalForm{"a rehearsed heatsink", kRehearsedThermalKeys};
const Form kRehearsedWaveformForm{"a rehearsed waveform", kRehearsedWaveformKeys};
const Form kRehearsedMetersForm{"a set of rehearsed meters", kRehearsedMetersKeys};
const Form kRehearsedPersonForm{"a rehearsed person", kRehearsedPersonKeys};

const Form kStairForm{"a stair file", kStairKeys};
const Form kPrototypeForm{"a prototype", kPrototypeKeys};
const Form kRatingsForm{"a set of ratings", kRatingsKeys};
const Form kOverloadForm{"an overload circuit", kOverloadKeys};
const Form kEnvironmentForm{"an environment", kEnvironmentKeys};
const Form kStaircaseForm{"a staircase", kStaircaseKeys};
const Form kStepForm{"a step", kStepKeys};
const Form kSetPointForm{"a set point", kSetPointKeys};
const Form kSettleForm{"a settle criterion", kSettleKeys};
const Form kElectricalForm{"an electrical criterion", kElectricalKeys};
const Form kThermalForm{"a thermal criterion", kThermalKeys};
const Form kPredictionForm{"a prediction", kPredictionKeys};
const Form kChecksForm{"a set of checks", kChecksKeys};
const Form kZeroForm{"a zero check", kZeroKeys};
const Form kTieForm{"a tie", kTieKeys};
const Form kTieLevelForm{"a tie's level", kTieLevelKeys};
const Form kIdleForm{"an idle step", kIdleKeys};
const Form kClosureForm{"a closure", kClosureKeys};
const Form kLimitForm{"a limit", kLimitKeys};
const Form kDecisionForm{"a decision rule", kDecisionKeys};
const Form kGuardForm{"a guard", kGuardKeys};
const Form kEndForm{"an end", kEndKeys};

const Form kProfileForm{"a profile", kProfileKeys};
const Form kProfileValueForm{"a profile's value", kProfileValueKeys};
const Form kProfileQueryForm{"a profile's query", kProfileQueryKeys};
const Form kProfileSettingForm{"a profile's setting", kProfileSettingKeys};
const Form kProfileSafeForm{"a profile's safe state", kProfileSafeKeys};

std::span<const Form* const> all_forms() {
  static constexpr std::array kAll = {&kHookupForm,
                                      &kInstrumentForm,
                                      &kLinkForm,
                                      &kChannelForm,
                                      &kConditionsForm,
                                      &kConversionForm,
                                      &kShuntForm,
                                      &kThermocoupleForm,
                                      &kPlatinumForm,
                                      &kThermistorForm,
                                      &kRangeForm,
                                      &kPortForm,
                                      &kControlForm,
                                      &kLoadForm,
                                      &kTemperatureForm,
                                      &kCaptureForm,
                                      &kRehearsalForm,
                                      &kRehearsedConverterForm,
                                      &kRehearsedSourceForm,
                                      &kRehearsedLoadForm,
                                      &kRehearsedThermalForm,
                                      &kRehearsedWaveformForm,
                                      &kRehearsedMetersForm,
                                      &kRehearsedPersonForm,
                                      &kStairForm,
                                      &kPrototypeForm,
                                      &kRatingsForm,
                                      &kOverloadForm,
                                      &kEnvironmentForm,
                                      &kStaircaseForm,
                                      &kStepForm,
                                      &kSetPointForm,
                                      &kSettleForm,
                                      &kElectricalForm,
                                      &kThermalForm,
                                      &kPredictionForm,
                                      &kChecksForm,
                                      &kZeroForm,
                                      &kTieForm,
                                      &kTieLevelForm,
                                      &kIdleForm,
                                      &kClosureForm,
                                      &kLimitForm,
                                      &kDecisionForm,
                                      &kGuardForm,
                                      &kEndForm,
                                      &kProfileForm,
                                      &kProfileValueForm,
                                      &kProfileQueryForm,
                                      &kProfileSettingForm,
                                      &kProfileSafeForm};
  return kAll;
}

}  // namespace loadstair::setup
