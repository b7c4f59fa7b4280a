# Runs GENERATOR with ARGUMENTS and fails if what it writes differs from the file EXPECTED.
include(${CMAKE_CURRENT_LIST_DIR}/run_to_file.cmake)
execute_process(COMMAND ${CMAKE_COMMAND} -E compare_files ${EXPECTED} ${ACTUAL} RESULT_VARIABLE differs)
if(NOT differs EQUAL 0)
  message(FATAL_ERROR "${EXPECTED} is not what the generator writes; see ${ACTUAL}, and commit that if it is meant")
endif()
