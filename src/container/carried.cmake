# container/carried.cmake - turns texts into a C file: cmake -DOUT=FILE -DNAME=WORD -DFROM=FILE,FILE... -P carried.cmake
# SPDX-License-Identifier: BSD-2-Clause
string(REPLACE "," ";" files "${FROM}")
list(LENGTH files count)
set(hex "")
foreach(file ${files})
    file(READ ${file} one HEX)
    if(count GREATER 1)
        get_filename_component(name ${file} NAME)
        string(HEX "\n==== ${name} ====\n\n" title)
        string(APPEND hex ${title})
    endif()
    string(APPEND hex ${one})
endforeach()
string(REGEX REPLACE "(..)" "0x\\1," bytes "${hex}")
string(REPEAT "0x..," 20 line)
string(REGEX REPLACE "(${line})" "\\1\n" bytes "${bytes}")
file(WRITE ${OUT} "/* made by container/carried.cmake */
#include \"container/carried.h\"

const uint8_t firn_carried_${NAME}[] = {
${bytes}
};
const size_t firn_carried_${NAME}_bytes = sizeof firn_carried_${NAME};
")
