# Runs GENERATOR with ARGUMENTS and keeps what it writes in the file ACTUAL.
execute_process(COMMAND ${GENERATOR} ${ARGUMENTS} OUTPUT_FILE ${ACTUAL} RESULT_VARIABLE result)
if(NOT result EQUAL 0)
  message(FATAL_ERROR "${GENERATOR} ${ARGUMENTS} ended with ${result}; must be 0")
endif()
