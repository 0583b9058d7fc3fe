# Debian's own python3: another one first on the path need not have scipy.
find_program(COLDPIN_PYTHON python3 PATHS /usr/bin NO_DEFAULT_PATH REQUIRED)
coldpin_test(outside_scipy_test SOURCES scipy_test.cpp LINK coldpin::measure coldpin::rig)
target_compile_definitions(outside_scipy_test PRIVATE COLDPIN_PYTHON="${COLDPIN_PYTHON}")
