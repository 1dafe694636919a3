# What the program carries with it: the sample bench that `loadstair demo` rehearses.
embed_files(${name} sample_files
  ${PROJECT_SOURCE_DIR}/sample-captures/north_bench.hookup.json
  ${PROJECT_SOURCE_DIR}/sample-captures/marten.stair.json)
target_compile_definitions(${name} PRIVATE LOADSTAIR_VERSION="${PROJECT_VERSION}")
