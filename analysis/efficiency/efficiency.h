// efficiency: from voltages, currents and powers at the ports of a converter to its input and output power,
// loss and efficiency, each an estimate; curves, loss models, weighted figures. Knows wiring positions,
// burden and reference planes. Not for files, readings or conversion (evaluation), nor for deciding anything
// (limits).
#pragma once

#include "analysis/efficiency/comparison.h"   // IWYU pragma: export
#include "analysis/efficiency/curve.h"        // IWYU pragma: export
#include "analysis/efficiency/loss_model.h"   // IWYU pragma: export
#include "analysis/efficiency/loss_pieces.h"  // IWYU pragma: export
#include "analysis/efficiency/peak.h"         // IWYU pragma: export
#include "analysis/efficiency/port.h"         // IWYU pragma: export
#include "analysis/efficiency/step.h"         // IWYU pragma: export
#include "analysis/efficiency/trade.h"        // IWYU pragma: export
#include "analysis/efficiency/weighted.h"     // IWYU pragma: export
