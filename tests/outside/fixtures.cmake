coldpin_test(outside_phantom_mismatch_test SOURCES phantom_mismatch_test.cpp LINK coldpin::rig)
