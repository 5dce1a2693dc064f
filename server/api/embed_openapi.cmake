# Turns openapi.json into a C file: cmake -DIN=openapi.json -DOUT=openapi.c -P embed_openapi.cmake
file(READ ${IN} hex HEX)
string(LENGTH "${hex}" digits)
math(EXPR bytes "${digits} / 2")
string(REGEX REPLACE "([0-9a-f][0-9a-f])" "0x\\1," list "${hex}")
string(REGEX REPLACE "(0x..,0x..,0x..,0x..,0x..,0x..,0x..,0x..,0x..,0x..,0x..,0x..,)" "\\1\n" list
  "${list}")
file(WRITE ${OUT} "/* Made by the build from openapi.json. */
#include \"openapi.h\"

const char lwd_openapi_text[] = {
${list}0x00};
const size_t lwd_openapi_len = ${bytes};
")
