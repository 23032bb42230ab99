-- The XOR form of xor_form.v, in VHDL.
library ieee;
use ieee.std_logic_1164.all;
use ieee.numeric_std.all;

entity xor_form_vhdl is
  generic (WIDTH : positive := 10);
  port (
    clk, reset : in std_logic;
    a, b       : in std_logic;
    count      : out signed(WIDTH - 1 downto 0);
    up, fault  : out std_logic
  );
end entity;

architecture rtl of xor_form_vhdl is
  signal a_seen, b_seen : std_logic_vector(2 downto 0);
  signal value : signed(WIDTH - 1 downto 0);
  signal moved, both, forward, last_up : std_logic;
begin
  moved <= a_seen(1) xor a_seen(2) xor b_seen(1) xor b_seen(2);
  both <= (a_seen(1) xor a_seen(2)) and (b_seen(1) xor b_seen(2));
  forward <= a_seen(1) xor b_seen(2);
  count <= value;
  up <= last_up;

  process (clk)
  begin
    if rising_edge(clk) then
      a_seen <= a_seen(1 downto 0) & a;
      b_seen <= b_seen(1 downto 0) & b;
      if reset = '1' then
        value <= (others => '0');
        last_up <= '0';
        fault <= '0';
      else
        fault <= both;
        if moved = '1' then
          last_up <= forward;
          if forward = '1' then
            value <= value + 1;
          else
            value <= value - 1;
          end if;
        end if;
      end if;
    end if;
  end process;
end architecture;
