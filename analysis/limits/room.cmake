# The limit tables become arrays: tables/index.csv names each table, tables/ID.csv holds its rows.
file(GLOB limit_tables CONFIGURE_DEPENDS ${PROJECT_SOURCE_DIR}/analysis/limits/tables/*.csv)
set(limit_arrays ${PROJECT_BINARY_DIR}/limit_tables/table_arrays.cpp)
add_custom_command(OUTPUT ${limit_arrays}
  COMMAND ${CMAKE_COMMAND} -DFROM=${PROJECT_SOURCE_DIR}/analysis/limits/tables -DOUT=${limit_arrays}
          -P ${PROJECT_SOURCE_DIR}/analysis/limits/table_arrays.cmake
  DEPENDS ${limit_tables} ${PROJECT_SOURCE_DIR}/analysis/limits/table_arrays.cmake
  VERBATIM)
target_sources(${name} PRIVATE ${limit_arrays})
