# Writes the files named in LIST as byte arrays: any content is safe, no literal length limit is met.
file(STRINGS ${LIST} files)
set(arrays "")
set(rows "")
set(index 0)
foreach(file IN LISTS files)
  file(READ ${file} hex HEX)
  string(REGEX REPLACE "([0-9a-f][0-9a-f])" "'\\\\x\\1'," bytes "${hex}")
  string(REGEX REPLACE "(('[^']*',){24})" "\\1\n" bytes "${bytes}")
  file(RELATIVE_PATH short ${ROOT} ${file})
  string(APPEND arrays "const char file_${index}[] = {${bytes}'\\0'};\n")
  string(APPEND rows "    {\"${short}\", {file_${index}, sizeof(file_${index}) - 1}},\n")
  math(EXPR index "${index} + 1")
endforeach()
set(header "// Made by cmake/embed_script.cmake.
#pragma once
#include <span>
#include <string_view>
namespace loadstair::embedded {
#ifndef LOADSTAIR_EMBEDDED_FILE
#define LOADSTAIR_EMBEDDED_FILE
struct File {
  std::string_view name;
  std::string_view text;
};
#endif
std::span<const File> ${NAME}();
}  // namespace loadstair::embedded
")
set(source "#include \"embedded/${NAME}.h\"
namespace loadstair::embedded {
namespace {
${arrays}
const File files[] = {
${rows}};
}  // namespace
std::span<const File> ${NAME}() { return files; }
}  // namespace loadstair::embedded
")
file(WRITE ${OUT}/${NAME}.h "${header}")
file(WRITE ${OUT}/${NAME}.cpp "${source}")
