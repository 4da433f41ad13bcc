# SPDX-License-Identifier: Apache-2.0
# Puts a file into a C source: cmake -DINPUT=x.css -DOUTPUT=x.c -DNAME=report_css -P embed.cmake
file(READ ${INPUT} bytes HEX)
string(REGEX REPLACE "([0-9a-f][0-9a-f])" "0x\\1," bytes "${bytes}")
string(REGEX REPLACE "((0x..,){16})" "\\1\n" bytes "${bytes}")
file(WRITE ${OUTPUT} "#include <stddef.h>
extern const char ${NAME}[];
extern const size_t ${NAME}_length;
const char ${NAME}[] = {
${bytes}
};
const size_t ${NAME}_length = sizeof ${NAME};
")
