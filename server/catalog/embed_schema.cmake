# Writes OUT, a C file that holds every schema/NNNN_*.sql as bytes. Run with cmake -P by the build.
# Bytes, not a string literal: a literal may not be longer than 4095 characters in strict C17.
file(GLOB scripts "${SCHEMA}/[0-9][0-9][0-9][0-9]_*.sql")
list(SORT scripts)
set(arrays "")
set(rows "")
set(expected 1)
foreach(script IN LISTS scripts)
  get_filename_component(name "${script}" NAME_WE)
  string(REGEX REPLACE "^0*([0-9]+)_.*$" "\\1" number "${name}")
  if(NOT number EQUAL expected)
    message(FATAL_ERROR "schema/${name}.sql: expected number ${expected}; numbers have no gaps")
  endif()
  file(READ "${script}" hex HEX)
  string(REGEX MATCHALL ".." bytes "${hex}")
  set(text "")
  set(column 0)
  foreach(byte IN LISTS bytes)
    if(byte MATCHES "^[89a-f]")
      message(FATAL_ERROR "schema/${name}.sql: keep it in ASCII")
    endif()
    string(APPEND text "0x${byte},")
    math(EXPR column "(${column} + 1) % 16")
    if(column EQUAL 0)
      string(APPEND text "\n    ")
    endif()
  endforeach()
  string(APPEND arrays "static const char sql_${number}[] = {\n    ${text}0x00};\n\n")
  string(APPEND rows "    {${number}, \"${name}\", sql_${number}},\n")
  math(EXPR expected "${expected} + 1")
endforeach()
file(WRITE "${OUT}.new" "/* Generated from server/catalog/schema by embed_schema.cmake. */
#include \"internal.h\"

${arrays}const lwd_catalog_migration lwd_catalog_migrations[] = {
${rows}};
const size_t lwd_catalog_n_migrations =
    sizeof lwd_catalog_migrations / sizeof lwd_catalog_migrations[0];
")
file(RENAME "${OUT}.new" "${OUT}")
