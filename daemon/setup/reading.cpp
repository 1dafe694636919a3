#include "daemon/setup/reading.h"

#include <fstream>
#include <iterator>
#include <system_error>

#include "analysis/base/number.h"
#include "analysis/base/unit.h"

namespace loadstair::setup {

using document::ObjectReader;
using document::print_text;
using document::suggest;

void read_format(ObjectReader& top) {
  const double format = top.number("format", document::kAnyNumber, "\"format\": 1");
  if (format == 1.0) return;
  top.complain("format", "the format is " + base::print_number(format) +
                             ", but this program reads format 1; write 1 if "
                             "the file is of that kind, or use the program that it was written for");
}

base::Outcome<std::string> load_text(const std::string& file, std::string_view what) {
  // Far beyond anything a person writes, and small enough to be read at once.
  constexpr std::size_t kLargest = 4U << 20U;
  std::ifstream stream{file, std::ios::binary};
  if (!stream) {
    const std::string why = std::generic_category().message(errno);
    return base::Refusal{file, std::string{what} + " cannot be opened: " + why + "; check the path"};
  }
  std::string text(kLargest + 1, '\0');
  stream.read(text.data(), static_cast<std::streamsize>(text.size()));
  if (stream.bad()) {
    return base::Refusal{file, std::string{what} + " cannot be read; is it a file, and not a folder?"};
  }
  text.resize(static_cast<std::size_t>(stream.gcount()));
  if (text.size() > kLargest) {
    return base::Refusal{file, std::string{what} + " is larger than 4 MiB; this cannot be the right file"};
  }
  return text;
}

void require_new(ObjectReader& reader, std::string_view key, std::string_view name,
                 std::span<const std::string_view> taken) {
  if (!contains(taken, name)) return;
  reader.complain(key,
                  "the name " + print_text(name) + " is taken by another one of these; names must differ");
}

void require_known(ObjectReader& reader, std::string_view key, std::string_view what, std::string_view name,
                   std::span<const std::string_view> known) {
  if (contains(known, name)) return;
  reader.complain(key, "there is no " + std::string{what} + " " + print_text(name) + suggest(name, known));
}

std::string plain_unit(ObjectReader& reader, std::string_view key, const std::string& written) {
  const auto unit = base::parse_unit(written);
  if (!unit) {
    reader.complain(key, "the unit " + print_text(written) +
                             " is not known; known are V, A, W, VA, var, Hz, ohm, degC, K, s, % and 1");
    return {};
  }
  if (unit->scale != 1.0) {
    reader.complain(key, "units here have no prefix; write " + print_text(unit->unit) + " instead of " +
                             print_text(written));
    return {};
  }
  return unit->unit;
}

}  // namespace loadstair::setup
