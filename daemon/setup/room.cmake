# The built-in profiles become part of the program: "embedded/built_in_profiles.h".
file(GLOB built_in_profiles CONFIGURE_DEPENDS ${PROJECT_SOURCE_DIR}/daemon/setup/profiles/*.profile.json)
embed_files(${name} built_in_profiles ${built_in_profiles})
