coldpin_test(outside_weighting_test SOURCES weighting_test.cpp LINK coldpin::spectrum)
coldpin_test(outside_window_test SOURCES window_test.cpp LINK coldpin::spectrum)
coldpin_test(outside_statistics_test SOURCES statistics_test.cpp LINK coldpin::spectrum)
coldpin_test(outside_thermal_noise_test SOURCES thermal_noise_test.cpp LINK coldpin::units)
