# Writes OUT, a C++ file that holds the text of FOLDER/NAME.table for each NAME of the list TABLES.
set(texts "")
foreach(name IN LISTS TABLES)
  file(READ ${FOLDER}/${name}.table text)
  string(FIND "${text}" ")table\"" end_marker)
  if(NOT end_marker EQUAL -1)
    message(FATAL_ERROR "${FOLDER}/${name}.table: contains )table\", which ends the C++ literal it is embedded in")
  endif()
  string(APPEND texts "    {\"${name}\", R\"table(${text})table\"},\n")
endforeach()
file(WRITE ${OUT}.new "// Generated from models/protocol/tables.
#include \"earshot/protocol/builtin.h\"

namespace earshot {

const std::vector<BuiltinText>& builtin_texts() {
  static const std::vector<BuiltinText> texts = {
${texts}  };
  return texts;
}

}  // namespace earshot
")
file(RENAME ${OUT}.new ${OUT})
