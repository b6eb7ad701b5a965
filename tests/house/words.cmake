# tests/house/words.cmake - nothing is left open, nothing is commented out, lines are not longer than 120 columns
# SPDX-License-Identifier: BSD-2-Clause
file(GLOB_RECURSE files ${ROOT}/src/*.c ${ROOT}/src/*.h ${ROOT}/include/*.h ${ROOT}/tests/*.c ${ROOT}/tests/*.h
     ${ROOT}/examples/*.c)
string(CONCAT open_words "(TO" "DO|FIX" "ME|XX" "X)[^a-zA-Z]")
foreach(file ${files})
    file(STRINGS ${file} lines REGEX "${open_words}|^#if 0")
    if(lines)
        message(SEND_ERROR "${file}: ${lines}")
    endif()
    file(STRINGS ${file} long REGEX "^.........................................................................................................................+$")
    if(long)
        message(SEND_ERROR "${file}: longer than 120 columns: ${long}")
    endif()
endforeach()
list(LENGTH files count)
if(count LESS 100)
    message(SEND_ERROR "only ${count} files seen: this test looks in the wrong place")
endif()
