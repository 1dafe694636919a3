// The chain of leads, ammeter and voltmeters between the converter's output terminals and the load, solved
// for one line of a spectrum: terminals (voltmeter) - inner lead - inner node (voltmeter) - ammeter - outer
// node (voltmeter) - outer lead - load. Kirchhoff's laws; T is double for a resistive load, complex for a
// fundamental.
#pragma once

#include "drivers/rehearsal/plant.h"

namespace loadstair::rehearsal {

/// Everything over the voltage at the terminals, when the load is an admittance.
template <class T>
struct Chain {
  T current;  ///< out of the terminals, siemens
  T ammeter;  ///< through the ammeter, siemens
  T inner;    ///< voltage at the inner node
  T outer;
  T load;
};

template <class T>
[[nodiscard]] Chain<T> make_chain(T load_siemens, const PortLeads& leads, const PortBurden& burden) {
  const T load = 1.0 / (1.0 + leads.outer_ohm * load_siemens);  // over the outer node's voltage
  const T at_outer = burden.outer_siemens + load_siemens * load;
  const T outer = 1.0 / (1.0 + burden.ammeter_ohm * at_outer);  // over the inner node's voltage
  const T at_inner = burden.inner_siemens + at_outer * outer;
  const T inner = 1.0 / (1.0 + leads.inner_ohm * at_inner);
  return {burden.terminals_siemens + at_inner * inner, at_outer * outer * inner, inner, outer * inner,
          load * outer * inner};
}

/// Everything over a current that the load draws on its own, the terminals' voltage of that line being zero.
struct Injection {
  double current = 1.0;  ///< out of the terminals, over the drawn current
  double ammeter = 1.0;
  double inner_ohm = 0.0;  ///< minus the voltage at the inner node, over the drawn current
  double outer_ohm = 0.0;
  double load_ohm = 0.0;
};

[[nodiscard]] inline Injection make_injection(double load_siemens, const PortLeads& leads,
                                              const PortBurden& burden) {
  const double behind_inner = leads.inner_ohm / (1.0 + leads.inner_ohm * burden.inner_siemens);
  const double series = behind_inner + burden.ammeter_ohm;
  const double behind_outer = series / (1.0 + series * burden.outer_siemens);
  const double behind_load = behind_outer + leads.outer_ohm;
  Injection r;
  const double at_load = 1.0 / (1.0 + load_siemens * behind_load);
  r.load_ohm = behind_load * at_load;
  r.outer_ohm = behind_outer * at_load;
  r.ammeter = at_load - burden.outer_siemens * r.outer_ohm;
  r.inner_ohm = behind_inner * r.ammeter;
  r.current = r.ammeter - burden.inner_siemens * r.inner_ohm;
  return r;
}

}  // namespace loadstair::rehearsal
