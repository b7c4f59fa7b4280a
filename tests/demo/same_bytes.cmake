# Runs GENERATOR with ARGUMENTS and fails if what it writes differs from the file EXPECTED.
execute_process(COMMAND ${GENERATOR} ${ARGUMENTS} OUTPUT_FILE ${ACTUAL} RESULT_VARIABLE result)
if(NOT result EQUAL 0)
  message(FATAL_ERROR "${GENERATOR} ${ARGUMENTS} ended with ${result}; must be 0")
endif()
execute_process(COMMAND ${CMAKE_COMMAND} -E compare_files ${EXPECTED} ${ACTUAL} RESULT_VARIABLE differs)
if(NOT differs EQUAL 0)
  message(FATAL_ERROR "${EXPECTED} is not what the generator writes; see ${ACTUAL}, and commit that if it is meant")
endif()
