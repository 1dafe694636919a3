# cmake -DFROM=folder -DOUT=file.cpp -P table_arrays.cmake: writes tables/*.csv as C++ arrays. A line that does
# not have its form stops the build. Texts stand in double quotes and hold neither a double quote nor a bracket.
function(read_lines file result)
  file(READ ${file} text)
  # CMake's own lists are separated by semicolons: they stay out of the text until the line has been taken apart.
  string(REPLACE ";" "<semicolon>" text "${text}")
  string(REGEX REPLACE "\n$" "" text "${text}")
  string(REPLACE "\n" ";" lines "${text}")
  list(POP_FRONT lines)
  set(${result} "${lines}" PARENT_SCOPE)
endfunction()

set(rows_text "")
set(tables_text "")
read_lines(${FROM}/index.csv tables)
foreach(table IN LISTS tables)
  if(NOT table MATCHES "^([a-z0-9_]+),([0-9]+),([01]),\"([^\"]+)\",\"([^\"]+)\",\"([^\"]+)\"$")
    message(FATAL_ERROR "${FROM}/index.csv: not a table: ${table}")
  endif()
  set(id ${CMAKE_MATCH_1})
  if(CMAKE_MATCH_3)
    set(simple true)
  else()
    set(simple false)
  endif()
  string(APPEND tables_text "    {\"${id}\", \"${CMAKE_MATCH_4}\", \"${CMAKE_MATCH_5}\",\n     \"${CMAKE_MATCH_6}\",\n"
    "     ${CMAKE_MATCH_2}, ${simple}, rows_${id}},\n")
  string(APPEND rows_text "constexpr Row rows_${id}[] = {\n")
  read_lines(${FROM}/${id}.csv rows)
  foreach(row IN LISTS rows)
    if(NOT row MATCHES "^([a-z_]+),([0-9]+),([0-9.]+),([a-z_]+),([^,\"]*),([a-z_]+)$")
      message(FATAL_ERROR "${FROM}/${id}.csv: not a row: ${row}")
    endif()
    string(APPEND rows_text "    {Quantity::${CMAKE_MATCH_1}, ${CMAKE_MATCH_2}, ${CMAKE_MATCH_3}, "
      "LimitUnit::${CMAKE_MATCH_4}, \"${CMAKE_MATCH_5}\", Status::${CMAKE_MATCH_6}},\n")
  endforeach()
  string(APPEND rows_text "};\n")
endforeach()
set(text "// Made by analysis/limits/table_arrays.cmake.
#include \"analysis/limits/tables.h\"
namespace loadstair::limits {
namespace {
${rows_text}
constexpr Table all_tables[] = {
${tables_text}};
}  // namespace
std::span<const Table> tables() { return all_tables; }
}  // namespace loadstair::limits
")
string(REPLACE "<semicolon>" ";" text "${text}")
file(WRITE ${OUT} "${text}")
