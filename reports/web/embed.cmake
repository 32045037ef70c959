# SPDX-License-Identifier: GPL-3.0-or-later
# Turns the page's files and uPlot's into one C++ source of room_reports, at build time. Included by the top-level CMakeLists.txt; run as a
# script (cmake -P) it writes that source.

if(CMAKE_SCRIPT_MODE_FILE)
  # Text as bytes: no escaping to get wrong, no limit on the length of a literal. OUTPUT, WEB and UPLOT are given.
  set(source "// Made from reports/web and uPlot by reports/web/embed.cmake.\n#include \"reports/page_assets.h\"\n\n")
  string(APPEND source "namespace hoverwright::reports {\nnamespace {\n\n")
  set(functions "")
  foreach(entry
      page_template=${WEB}/report.html
      page_style=${WEB}/report.css
      page_script=${WEB}/report.js
      uplot_script=${UPLOT}/dist/uPlot.iife.min.js
      uplot_style=${UPLOT}/dist/uPlot.min.css
      uplot_licence=${UPLOT}/LICENSE)
    string(REGEX MATCH "^([a-z_]+)=(.*)$" matched "${entry}")
    set(name ${CMAKE_MATCH_1})
    set(path "${CMAKE_MATCH_2}")
    file(READ "${path}" bytes HEX)
    string(REGEX REPLACE "(................................)" "\\1\n" bytes "${bytes}")
    string(REGEX REPLACE "([0-9a-f][0-9a-f])" "'\\\\x\\1'," bytes "${bytes}")
    string(APPEND source "constexpr char k_${name}[] = {\n${bytes}'\\0'};\n\n")
    string(APPEND functions "std::string_view ${name}() { return {k_${name}, sizeof(k_${name}) - 1}; }\n")
  endforeach()
  string(APPEND source "}  // namespace\n\n${functions}\n}  // namespace hoverwright::reports\n")
  file(WRITE "${OUTPUT}" "${source}")
  return()
endif()

set(web ${CMAKE_SOURCE_DIR}/reports/web)
set(uplot ${web}/node_modules/uplot)
if(NOT EXISTS ${uplot}/dist/uPlot.iife.min.js)
  message(FATAL_ERROR "The report page's plotting library is not installed (${uplot}).\n"
    "Run scripts/setup, which installs it from reports/web/package-lock.json.")
endif()

set(page_assets ${CMAKE_BINARY_DIR}/reports/page_assets.cpp)
add_custom_command(
  OUTPUT ${page_assets}
  COMMAND ${CMAKE_COMMAND} -DOUTPUT=${page_assets} -DWEB=${web} -DUPLOT=${uplot} -P ${web}/embed.cmake
  DEPENDS ${web}/embed.cmake ${web}/report.html ${web}/report.css ${web}/report.js
    ${uplot}/dist/uPlot.iife.min.js ${uplot}/dist/uPlot.min.css ${uplot}/LICENSE
  COMMENT "Embedding the report page"
  VERBATIM)
target_sources(room_reports PRIVATE ${page_assets})
