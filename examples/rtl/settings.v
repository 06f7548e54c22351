// Settings: twenty words of 16 bits behind a small bus, with read-back of what the station measures.
module settings (input clk, input rst_n, input bus_write, input [5:0] bus_address, input [15:0] bus_in, output reg [15:0] bus_out,
                 input [95:0] means, input [11:0] wet_bulb, input [31:0] now, input [15:0] log_data, input [7:0] log_head,
                 output [319:0] words);
  reg [15:0] word [0:19];
  integer i;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) for (i = 0; i < 20; i = i + 1) word[i] <= 16'd0;
    else if (bus_write & !bus_address[5] & (bus_address[4:0] < 5'd20)) word[bus_address[4:0]] <= bus_in;
  genvar g;
  generate for (g = 0; g < 20; g = g + 1) begin : flat
    assign words[16*g +: 16] = word[g];
  end endgenerate
  always @* begin
    if (!bus_address[5]) bus_out = (bus_address[4:0] < 5'd20) ? word[bus_address[4:0]] : 16'd0;
    else case (bus_address[4:0])
      5'd0: bus_out = {4'd0, means[11:0]};    5'd1: bus_out = {4'd0, means[23:12]};
      5'd2: bus_out = {4'd0, means[35:24]};   5'd3: bus_out = {4'd0, means[47:36]};
      5'd4: bus_out = {4'd0, means[59:48]};   5'd5: bus_out = {4'd0, means[71:60]};
      5'd6: bus_out = {4'd0, means[83:72]};   5'd7: bus_out = {4'd0, means[95:84]};
      5'd8: bus_out = {4'd0, wet_bulb};       5'd9: bus_out = now[15:0];
      5'd10: bus_out = now[31:16];            5'd11: bus_out = log_data;
      5'd12: bus_out = {8'd0, log_head};      default: bus_out = 16'd0;
    endcase
  end
endmodule
