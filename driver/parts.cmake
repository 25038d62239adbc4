# What every part is built with, and the rule that dependency runs one way.
#
# A part is a folder that is one library. It may link only parts that stand before it in its list,
# and sim/ only what SIM_MAY_LINK names: the simulator solves its circuits and writes its bytes with
# code of its own, so that a mistake in the driver cannot cancel out.

set(DRIVER_PARTS core units metrology description bridge mechanics protocol transport device rack calibration
    correction recording ledger plugin)
set(SIM_PARTS wire fault physics relays amplifier)
set(SIM_MAY_LINK core units description)

find_package(Threads REQUIRED)
find_package(PkgConfig REQUIRED)
find_package(spdlog REQUIRED)
find_package(fmt REQUIRED)
pkg_check_modules(tomlplusplus REQUIRED IMPORTED_TARGET tomlplusplus)
pkg_check_modules(eigen3 REQUIRED IMPORTED_TARGET eigen3)
pkg_check_modules(hdf5 REQUIRED IMPORTED_TARGET hdf5)

add_library(shuntwright_flags INTERFACE)
target_compile_options(shuntwright_flags INTERFACE
  $<$<COMPILE_LANGUAGE:CXX>:-Wall -Wextra -Wpedantic -Wshadow -Wconversion -Wno-sign-conversion
    -Wnon-virtual-dtor -Woverloaded-virtual>
  # g++ 12 takes the frame allocator of every Asio coroutine for a mismatch.
  $<$<AND:$<COMPILE_LANGUAGE:CXX>,$<CXX_COMPILER_ID:GNU>>:-Wno-mismatched-new-delete>
  $<$<COMPILE_LANGUAGE:C>:-Wall -Wextra -Wpedantic>)
target_compile_definitions(shuntwright_flags INTERFACE SHUNTWRIGHT_VERSION="${PROJECT_VERSION}")
target_include_directories(shuntwright_flags INTERFACE ${CMAKE_SOURCE_DIR})
if(SHUNTWRIGHT_SANITIZE)
  target_compile_options(shuntwright_flags INTERFACE
    -fsanitize=${SHUNTWRIGHT_SANITIZE} -fno-omit-frame-pointer -fno-sanitize-recover=all)
  target_link_options(shuntwright_flags INTERFACE -fsanitize=${SHUNTWRIGHT_SANITIZE})
  if(SHUNTWRIGHT_SANITIZE MATCHES "thread" AND CMAKE_CXX_COMPILER_ID STREQUAL "GNU")
    target_compile_options(shuntwright_flags INTERFACE -Wno-tsan)
  endif()
endif()

if(SHUNTWRIGHT_FUZZ)
  target_compile_options(shuntwright_flags INTERFACE -fsanitize=fuzzer-no-link)
endif()

# Boost is used header-only, toml++ and spdlog in their compiled form.
add_library(shuntwright_asio INTERFACE)
target_compile_definitions(shuntwright_asio INTERFACE BOOST_ASIO_SEPARATE_COMPILATION
  BOOST_ASIO_NO_DEPRECATED)
target_link_libraries(shuntwright_asio INTERFACE Threads::Threads)
add_library(shuntwright_toml INTERFACE)
target_compile_definitions(shuntwright_toml INTERFACE TOML_HEADER_ONLY=0)
target_link_libraries(shuntwright_toml INTERFACE PkgConfig::tomlplusplus)

# shuntwright_part(NAME side [LINKS part...] [USES library...])
#   side     driver or sim: the folder the part stands in
#   LINKS    parts it may use, checked against the order above
#   USES     outside libraries
function(shuntwright_part side name)
  cmake_parse_arguments(PART "" "" "LINKS;USES;PRIVATE" ${ARGN})
  if(side STREQUAL "driver")
    list(FIND DRIVER_PARTS ${name} own)
    foreach(link IN LISTS PART_LINKS)
      list(FIND DRIVER_PARTS ${link} theirs)
      if(theirs EQUAL -1 OR NOT theirs LESS own)
        message(FATAL_ERROR "driver/${name} links ${link}: a part may use only what stands before it in "
          "DRIVER_PARTS (${DRIVER_PARTS})")
      endif()
    endforeach()
    set(prefix sw)
  else()
    list(FIND SIM_PARTS ${name} own)
    foreach(link IN LISTS PART_LINKS)
      list(FIND SIM_PARTS ${link} theirs)
      if(theirs EQUAL -1)
        if(NOT link IN_LIST SIM_MAY_LINK)
          message(FATAL_ERROR "sim/${name} links ${link}: of the driver, sim/ may use only ${SIM_MAY_LINK}")
        endif()
      elseif(NOT theirs LESS own)
        message(FATAL_ERROR "sim/${name} links ${link}: a part may use only what stands before it in "
          "SIM_PARTS (${SIM_PARTS})")
      endif()
    endforeach()
    set(prefix sim)
  endif()
  file(GLOB sources CONFIGURE_DEPENDS ${CMAKE_CURRENT_SOURCE_DIR}/${name}/*.cpp
    ${CMAKE_CURRENT_SOURCE_DIR}/${name}/*.c)
  set(links shuntwright_flags ${PART_USES})
  foreach(link IN LISTS PART_LINKS)
    if(link IN_LIST DRIVER_PARTS)
      list(APPEND links sw_${link})
    else()
      list(APPEND links sim_${link})
    endif()
  endforeach()
  if(sources)
    add_library(${prefix}_${name} STATIC ${sources})
    target_link_libraries(${prefix}_${name} PUBLIC ${links} PRIVATE ${PART_PRIVATE})
  else()
    add_library(${prefix}_${name} INTERFACE)
    target_link_libraries(${prefix}_${name} INTERFACE ${links} ${PART_PRIVATE})
  endif()
endfunction()
