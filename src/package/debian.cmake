# src/package/debian.cmake - Debian packages by CPack: firn, libfirn0 and libfirn-dev
# SPDX-License-Identifier: BSD-2-Clause
set(FIRN_CONTACT "firn maintainers <firn@packages.invalid>" CACHE STRING "who answers for the packages: NAME <ADDRESS>")
set(CPACK_GENERATOR DEB)
set(CPACK_PACKAGE_CONTACT ${FIRN_CONTACT})
set(CPACK_PACKAGE_DESCRIPTION_SUMMARY "")      # each package has its own first line
set(CPACK_PACKAGE_VERSION ${PROJECT_VERSION})
set(CPACK_PACKAGING_INSTALL_PREFIX /usr)
set(CPACK_STRIP_FILES ON)
set(CPACK_DEB_COMPONENT_INSTALL ON)
set(CPACK_COMPONENTS_ALL program library development)
set(CPACK_DEBIAN_FILE_NAME DEB-DEFAULT)
set(CPACK_DEBIAN_PACKAGE_SHLIBDEPS ON)
set(CPACK_DEBIAN_PACKAGE_GENERATE_SHLIBS ON)
set(CPACK_DEBIAN_PACKAGE_GENERATE_SHLIBS_POLICY ">=")
set(CPACK_DEBIAN_PACKAGE_CONTROL_STRICT_PERMISSION ON)

set(CPACK_DEBIAN_PROGRAM_PACKAGE_NAME firn)
set(CPACK_DEBIAN_PROGRAM_PACKAGE_SECTION utils)
set(CPACK_DEBIAN_PROGRAM_DESCRIPTION "${PROJECT_DESCRIPTION}
Packs folders and archives with all their metadata into one self-describing
container for years on a shelf. Containers heal flipped bits by themselves and
lost stretches from a reserve, and give every byte back or say which are gone.
.
Containers are checked and repaired in place, put together again from several
damaged copies, and carry their own specification and the source of a reader.")
set(CPACK_DEBIAN_LIBRARY_PACKAGE_NAME libfirn0)
set(CPACK_DEBIAN_LIBRARY_PACKAGE_SECTION libs)
set(CPACK_DEBIAN_LIBRARY_PACKAGE_CONTROL_EXTRA ${CMAKE_CURRENT_LIST_DIR}/triggers)
set(CPACK_DEBIAN_LIBRARY_DESCRIPTION "${PROJECT_DESCRIPTION}, shared library
What programs that are linked to libfirn need. The program firn does not.")
set(CPACK_DEBIAN_DEVELOPMENT_PACKAGE_NAME libfirn-dev)
set(CPACK_DEBIAN_DEVELOPMENT_PACKAGE_SECTION libdevel)
set(CPACK_DEBIAN_DEVELOPMENT_DESCRIPTION "${PROJECT_DESCRIPTION}, development files
Headers, static library, files for pkg-config and CMake, and small example
programs.")
# firn.pc names the libraries that a static link takes, and pkg-config wants to know them in any case
set(CPACK_DEBIAN_DEVELOPMENT_PACKAGE_DEPENDS
    "libfirn0 (= ${PROJECT_VERSION}), libarchive-dev, libssl-dev, libxxhash-dev")

# Debian wants these two with every package, and man pages and changelogs compressed; no other installation has them
foreach(component program library development)
    string(TOUPPER ${component} upper)
    foreach(file copyright changelog)
        install(FILES package/${file} DESTINATION ${CMAKE_INSTALL_DATADIR}/doc/${CPACK_DEBIAN_${upper}_PACKAGE_NAME}
                COMPONENT ${component} EXCLUDE_FROM_ALL)
    endforeach()
endforeach()
set(CPACK_PRE_BUILD_SCRIPTS ${CMAKE_CURRENT_LIST_DIR}/compress.cmake)
include(CPack)
