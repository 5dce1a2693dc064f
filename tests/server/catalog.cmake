# The catalog's crash test: a writing process killed again and again. Included by the CMakeLists.txt
# beside it, which makes the entries of test_catalog*.c itself. The driver is never sanitized, so the
# build for the thread sanitizer would only repeat what the other one has run.
if(LEEWAY_SANITIZE STREQUAL "thread")
  return()
endif()
get_filename_component(lwd_server_dir ${CMAKE_CURRENT_LIST_DIR}/../../server ABSOLUTE)
find_package(Threads REQUIRED)
find_program(LWT_PYTHON3 NAMES python3 PATHS /usr/bin NO_DEFAULT_PATH REQUIRED)
add_executable(catalog_driver
  ${CMAKE_CURRENT_LIST_DIR}/catalog_driver.c ${lwd_server_dir}/codec/sha256.c)
target_include_directories(catalog_driver PRIVATE ${lwd_server_dir})
target_compile_options(catalog_driver PRIVATE -fno-sanitize=all)
target_link_options(catalog_driver PRIVATE -fno-sanitize=all)
target_link_libraries(catalog_driver PRIVATE lwd_catalog_plain Threads::Threads)
add_test(NAME server_catalog_crash
  COMMAND ${LWT_PYTHON3} ${CMAKE_CURRENT_LIST_DIR}/crash_catalog.py $<TARGET_FILE:catalog_driver>)
set_tests_properties(server_catalog_crash PROPERTIES TIMEOUT 180)
