/* Copyright the Earshot authors.
   SPDX-License-Identifier: Apache-2.0 */
int shared;

int main(void) {
  shared = 1;
  return shared - 1;
}
