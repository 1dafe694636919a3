# embed_files(TARGET NAME files...): puts files into the program as
#   namespace loadstair::embedded { struct File { std::string_view name, text; }; std::span<const File> NAME(); }
# declared in <build>/embedded/NAME.h (include as "embedded/NAME.h"). Names are paths from the source folder.
function(embed_files target name)
  set(dir ${PROJECT_BINARY_DIR}/embedded_${name}/embedded)
  set(list_file ${dir}/${name}.list)
  file(MAKE_DIRECTORY ${dir})
  string(REPLACE ";" "\n" lines "${ARGN}")
  file(WRITE ${list_file}.new "${lines}\n")
  file(COPY_FILE ${list_file}.new ${list_file} ONLY_IF_DIFFERENT)
  add_custom_command(OUTPUT ${dir}/${name}.cpp ${dir}/${name}.h
    COMMAND ${CMAKE_COMMAND} -DNAME=${name} -DLIST=${list_file} -DROOT=${PROJECT_SOURCE_DIR} -DOUT=${dir}
            -P ${PROJECT_SOURCE_DIR}/cmake/embed_script.cmake
    DEPENDS ${ARGN} ${list_file} ${PROJECT_SOURCE_DIR}/cmake/embed_script.cmake
    VERBATIM)
  target_sources(${target} PRIVATE ${dir}/${name}.cpp ${dir}/${name}.h)
  target_include_directories(${target} PRIVATE ${PROJECT_BINARY_DIR}/embedded_${name})
endfunction()
