-- The steps of step_direction.v, in VHDL: no reset, initial values, a low pulse for each state.
library ieee;
use ieee.std_logic_1164.all;

entity step_direction_vhdl is
  port (
    clk    : in std_logic;
    ab     : in std_logic_vector(1 downto 0);
    step_n : out std_logic := '1';
    dir    : out std_logic := '0'
  );
end entity;

architecture rtl of step_direction_vhdl is
  signal s0, s1, s2 : std_logic_vector(1 downto 0) := "00";
  signal wait_for : natural range 0 to 3 := 3;
  signal go : std_logic := '0';
begin
  process (clk)
    variable moved : boolean;
  begin
    if rising_edge(clk) then
      moved := (s1(1) xor s1(0) xor s2(1) xor s2(0)) = '1';
      s0 <= ab;
      s1 <= s0;
      s2 <= s1;
      if wait_for /= 0 then
        wait_for <= wait_for - 1;
        go <= '0';
      elsif moved then
        go <= '1';
        dir <= s1(1) xor s2(0);
      else
        go <= '0';
      end if;
      step_n <= not go;
    end if;
  end process;
end architecture;
