# src/package/compress.cmake - run by CPack on what it is about to pack: man pages and changelogs as Debian wants them
# SPDX-License-Identifier: BSD-2-Clause
set(packages ${CPACK_TEMPORARY_DIRECTORY}/*/usr/share)
file(GLOB texts ${packages}/man/man?/* ${packages}/doc/*/changelog)
if(NOT texts)
    message(FATAL_ERROR "no man pages below ${CPACK_TEMPORARY_DIRECTORY}")
endif()
foreach(text ${texts})
    execute_process(COMMAND gzip -9 -n ${text} RESULT_VARIABLE failed)
    if(failed)
        message(FATAL_ERROR "gzip ${text} failed")
    endif()
endforeach()
