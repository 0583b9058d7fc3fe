coldpin_test(outside_quasi_peak_test SOURCES quasi_peak_test.cpp LINK coldpin::spectrum)
