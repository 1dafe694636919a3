// Where an instrument's readings and events go, as they happen.
#pragma once

#include "drivers/instrument/reading.h"

namespace loadstair::instrument {

/// Called on the instrument's executor; must return soon and must not throw.
class Sink {
 public:
  virtual ~Sink() = default;
  virtual void on_exchange(const Exchange& exchange) = 0;
  virtual void on_event(const Event& event) = 0;
};

}  // namespace loadstair::instrument
