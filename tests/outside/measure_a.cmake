coldpin_test(outside_measured_noise_test SOURCES measured_noise_test.cpp LINK coldpin::measure)
