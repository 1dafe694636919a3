// Every key that the files of this room may hold, in one place: the readers accept these and docs/files.md
// describes them (tests/daemon/setup/docs_test.cpp compares the two).
#pragma once

#include <span>

#include "drivers/document/reader.h"

namespace loadstair::setup {

extern const document::Form kHookupForm, kInstrumentForm, kLinkForm, kChannelForm, kConditionsForm,
    kConversionForm, kShuntForm, kThermocoupleForm, kPlatinumForm, kThermistorForm, kRangeForm, kPortForm,
    kControlForm, kLoadForm, kTemperatureForm, kCaptureForm, kRehearsalForm, kRehearsedConverterForm,
    kRehearsedSourceForm, kRehearsedLoadForm, kRehearsedThermalForm, kRehearsedWaveformForm,
    kRehearsedMetersForm, kRehearsedPersonForm;
extern const document::Form kStairForm, kPrototypeForm, kRatingsForm, kOverloadForm, kEnvironmentForm,
    kStaircaseForm, kStepForm, kSetPointForm, kSettleForm, kElectricalForm, kThermalForm, kPredictionForm,
    kChecksForm, kZeroForm, kTieForm, kTieLevelForm, kIdleForm, kClosureForm, kLimitForm, kDecisionForm,
    kGuardForm, kEndForm;
extern const document::Form kProfileForm, kProfileValueForm, kProfileQueryForm, kProfileSettingForm,
    kProfileSafeForm;

/// All of them, in the order of docs/files.md.
[[nodiscard]] std::span<const document::Form* const> all_forms();

}  // namespace loadstair::setup
