# Writes OUT, a C++ file that holds the text of FOLDER/NAME.grade for each NAME of the list GRADES.
set(texts "")
foreach(name IN LISTS GRADES)
  file(READ ${FOLDER}/${name}.grade text)
  string(REPLACE ";" "\\;" text "${text}")
  string(APPEND texts "    {\"${name}\", R\"grade(${text})grade\"},\n")
endforeach()
file(WRITE ${OUT}.new "// Generated from models/dram/grades.
#include \"earshot/dram/builtin_grades.h\"

namespace earshot {

const std::vector<BuiltinGrade>& builtin_grade_texts() {
  static const std::vector<BuiltinGrade> texts = {
${texts}  };
  return texts;
}

}  // namespace earshot
")
file(RENAME ${OUT}.new ${OUT})
